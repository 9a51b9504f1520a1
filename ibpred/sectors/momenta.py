"""Search for changes of momenta that carry given lines into given lines.

With ``k -> M k + N p`` (det M = +-1) and a kinematic symmetry ``p -> R p`` every source line's
momentum has to become plus or minus the momentum of its target line. L lines with independent loop
momenta fix M and N for each choice of signs; all other lines are then compared. Integers throughout.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import product
from math import lcm
from typing import Any

import flint
import numpy as np
from numpy.typing import NDArray

from ibpred.sectors.forms import LineForms, Matrix, images, is_line
from ibpred.sectors.legs import LegMap, leg_maps
from ibpred.sectors.mapping import Image

_SMALL = 2**13  # products of three such entries, summed over momenta, stay below 2**63


@dataclass(frozen=True)
class FamilyPair:
    """Two families between which maps are sought (possibly the same one).

    Attributes
    ----------
    source, target
        Lines as quadratic forms.
    scale
        Common denominator of all line momenta.
    source_rows, target_rows
        Line momenta times `scale`, (n, L+E); zero rows for lines that are no squares.
    legs
        The leg maps that keep the products of external momenta.
    """

    source: LineForms
    target: LineForms
    scale: int
    source_rows: NDArray[np.object_]
    target_rows: NDArray[np.object_]
    legs: tuple[LegMap, ...]


def family_pair(source: LineForms, target: LineForms) -> FamilyPair:
    """Prepare the search for maps between sectors of two families."""
    scale = lcm(*(x.denominator for s in (*source.squares, *target.squares) if s for x in s[1]))
    legs: tuple[LegMap, ...] = ()
    if len(source.family.loops) == len(target.family.loops):
        legs = leg_maps(source.family, target.family)
    return FamilyPair(source, target, scale, _rows(source, scale), _rows(target, scale), legs)


def _rows(forms: LineForms, scale: int) -> NDArray[np.object_]:
    width = len(forms.family.loops) + len(forms.family.external)
    rows = [[0] * width if s is None else [int(x * scale) for x in s[1]] for s in forms.squares]
    return np.array(rows, dtype=object)


def momentum_changes(
    pair: FamilyPair, source_lines: Sequence[int], target_lines: Sequence[int]
) -> Iterator[Matrix]:
    """Changes of momenta under which the line momenta of the source become those of the target.

    Parameters
    ----------
    pair
        The families.
    source_lines, target_lines
        ``source_lines[i]`` is to become ``target_lines[i]``. Lines that are no squares of momenta
        are left to `verified_images`.

    Yields
    ------
    matrix
        (L+E) x (L+E), old momenta in terms of new ones, block upper triangular. Candidates: only
        momenta have been compared so far, up to sign.
    """
    loops = len(pair.source.family.loops)
    matched = [
        (i, j)
        for i, j in zip(source_lines, target_lines, strict=True)
        if pair.source.squares[i] is not None and pair.target.squares[j] is not None
    ]
    if any(_factor(pair.source, i) != _factor(pair.target, j) for i, j in matched):
        return
    old = pair.source_rows[[i for i, _ in matched]]
    new = pair.target_rows[[j for _, j in matched]]
    chosen = independent_rows(old[:, :loops].tolist(), loops) if matched else []
    if len(chosen) < loops or not pair.legs:
        return
    base = flint.fmpq_mat([[flint.fmpq(int(x)) for x in old[i, :loops]] for i in chosen]).inv()
    scale = lcm(*(int(x.q) for x in base.entries()))
    base_inverse = np.array([[int(x * scale) for x in row] for row in base.table()], dtype=object)
    width = old.shape[1]
    rotation = np.zeros((len(pair.legs), width, width), dtype=object)
    rotation[:, loops:, loops:] = np.array(pair.legs, dtype=object).reshape(
        len(pair.legs), width - loops, width - loops
    )
    signs = np.array(list(product((1, -1), repeat=loops)), dtype=object)
    old, new, weights, base_inverse, signs, rotation = _narrow(
        old, new, old[:, :loops] @ base_inverse, base_inverse, signs, rotation, scale
    )
    turned = old @ rotation  # what R alone makes of the old momenta: (legs, lines, width)
    aim = signs[:, :, None] * new[chosen]  # (signs, L, width)
    residual = aim[None] - turned[:, None, chosen]  # (legs, signs, L, width)
    result = weights @ residual + scale * turned[:, None]
    plus = (result == scale * new).all(axis=-1)
    minus = (result == -scale * new).all(axis=-1)
    for leg, sign in zip(*np.nonzero((plus | minus).all(axis=-1)), strict=True):
        top = base_inverse @ residual[leg, sign]
        change = tuple(tuple(Fraction(int(x), scale) for x in row) for row in top)
        bottom = tuple(tuple(Fraction(int(x)) for x in row) for row in rotation[leg, loops:])
        if _is_unimodular(change, loops):
            yield (*change, *bottom)


def verified_images(
    pair: FamilyPair, source_lines: Sequence[int], target_lines: Sequence[int], change: Matrix
) -> tuple[tuple[Image, ...], tuple[int, ...]] | None:
    """Images of all lines of the source family, if the given lines become exactly the given lines.

    Returns
    -------
    images, flips
        With the cut lines that become minus the given line; None if a line becomes something else.
    """
    found = images(pair.source, pair.target, change)
    flips = []
    for i, j in zip(source_lines, target_lines, strict=True):
        if is_line(found[i], j):
            continue
        if not pair.source.family.lines[i].cut or not is_line(found[i], j, -1):
            return None
        flips.append(i)
    return found, tuple(flips)


def independent_rows(rows: Sequence[Sequence[int]], wanted: int) -> list[int]:
    """Indices of the first `wanted` rows that are linearly independent (fewer if there are fewer)."""
    chosen: list[int] = []
    for i in range(len(rows)):
        if len(chosen) == wanted:
            break
        trial = flint.fmpz_mat([[int(x) for x in rows[j]] for j in (*chosen, i)])
        if trial.rank() == len(chosen) + 1:
            chosen.append(i)
    return chosen


def _factor(forms: LineForms, line: int) -> Fraction | None:
    square = forms.squares[line]
    return None if square is None else square[0]


def _is_unimodular(change: Sequence[Sequence[Fraction]], loops: int) -> bool:
    block = [[flint.fmpq(x.numerator, x.denominator) for x in row[:loops]] for row in change]
    return bool(abs(flint.fmpq_mat(block).det()) == 1)


def _narrow(*arrays: Any) -> tuple[Any, ...]:
    """Machine integers where all entries are small enough for exact products, else as they are."""
    *tables, scale = arrays
    if all((abs(t) < _SMALL).all() for t in tables) and scale < _SMALL:
        return tuple(t.astype(np.int64) for t in tables)
    return tuple(tables)
