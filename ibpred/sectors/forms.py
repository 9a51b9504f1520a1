"""Lines as quadratic forms in all momenta, in exact integers, ready for linear changes of momenta."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import gcd, lcm
from typing import Any

import flint
import numpy as np
from numpy.typing import NDArray

from ibpred.errors import InputError
from ibpred.family.definition import FamilyDefinition, Line
from ibpred.sectors.mapping import Image

Square = tuple[Fraction, tuple[Fraction, ...]]
"""(c, q) of a line ``c q^2 + constant``; q over (loop, external) momenta, its loop part primitive."""

Matrix = tuple[tuple[Fraction, ...], ...]


@dataclass(frozen=True)
class LineForms:
    """The lines of a family as quadratic forms.

    Attributes
    ----------
    family
        The family.
    squares
        For each line its (c, q), or None where the line is no square of a momentum.
    forms
        (n, L+E, L+E) Python integers: symmetric matrices, times `scale`, of the parts of the lines
        that hold loop momenta.
    scale
        Common denominator of the forms.
    inverse
        FLINT matrix: row vector of monomial coefficients (`monomials`) times it = coefficients of
        the lines.
    """

    family: FamilyDefinition
    squares: tuple[Square | None, ...]
    forms: NDArray[np.object_]
    scale: int
    inverse: Any


def monomials(loops: int, external: int) -> tuple[tuple[int, int], ...]:
    """Pairs (i, j) of momenta, loop momenta first, whose products hold a loop momentum."""
    return tuple((i, j) for i in range(loops) for j in range(i, loops + external))


def line_forms(family: FamilyDefinition) -> LineForms:
    """Quadratic forms of a family's lines.

    Raises
    ------
    InputError
        If the lines do not determine all scalar products of loop momenta.
    """
    loops, external = len(family.loops), len(family.external)
    scale = lcm(
        2,
        *(
            2 * entry.denominator
            for line in family.lines
            for table in (line.quadratic, line.linear)
            for row in table
            for entry in row
        ),
    )
    forms = np.zeros((len(family.lines), loops + external, loops + external), dtype=object)
    for number, line in enumerate(family.lines):
        for i in range(loops):
            for j in range(loops):
                forms[number, i, j] = int(line.quadratic[i][j] * scale)
            for e in range(external):
                half = int(line.linear[i][e] * scale / 2)
                forms[number, i, loops + e] = forms[number, loops + e, i] = half
    pairs = monomials(loops, external)
    if len(pairs) != len(family.lines):
        raise InputError(f"{family.name}: {len(pairs)} lines are needed, {len(family.lines)} are given")
    try:
        inverse = _monomial_matrix(forms, scale, pairs).inv()
    except ZeroDivisionError:
        raise InputError(f"{family.name}: the lines are linearly dependent") from None
    return LineForms(family, tuple(square_of(line) for line in family.lines), forms, scale, inverse)


def square_of(line: Line) -> Square | None:
    """(c, q) with ``line = c q^2 + constant``, up to products of external momenta; None if there is none."""
    loops = range(len(line.quadratic))
    pivot = next((i for i in loops if line.quadratic[i][i]), None)
    if pivot is None:
        return None
    row = line.quadratic[pivot]
    common = Fraction(gcd(*(x.numerator for x in row)), lcm(*(x.denominator for x in row)))
    if row[pivot] < 0:
        common = -common
    inner = tuple(x / common for x in row)  # primitive integers, positive at the pivot
    c = row[pivot] / inner[pivot] ** 2
    if any(line.quadratic[i][j] != c * inner[i] * inner[j] for i in loops for j in loops):
        return None
    outer = tuple(x / (2 * c * inner[pivot]) for x in line.linear[pivot])
    if any(line.linear[i][e] != 2 * c * inner[i] * b for i in loops for e, b in enumerate(outer)):
        return None
    return c, (*inner, *outer)


def images(source: LineForms, target: LineForms, change: Matrix) -> tuple[Image, ...]:
    """What the source's lines become under a change of momenta, in terms of the target's lines.

    Parameters
    ----------
    source, target
        Families with the same kinematic ring and the same numbers of momenta.
    change
        (L+E) x (L+E): old loop and external momenta in terms of new ones. The part on external
        momenta is to keep their products.
    """
    family = target.family
    loops, external = len(family.loops), len(family.external)
    scale = lcm(*(x.denominator for row in change for x in row))
    t = np.array([[int(x * scale) for x in row] for row in change], dtype=object)
    forms = t.T @ source.forms @ t
    total_scale = scale * scale * source.scale
    pairs = monomials(loops, external)
    coefficients = (_monomial_matrix(forms, total_scale, pairs) * target.inverse).table()
    result: list[Image] = []
    for line, form, row in zip(source.family.lines, forms, coefficients, strict=True):
        constant = line.constant
        for e in range(external):
            for f in range(external):
                if form[loops + e, loops + f]:
                    weight = Fraction(form[loops + e, loops + f], total_scale)
                    constant = constant + family.gram[e][f] * weight
        parts = []
        for number, coefficient in enumerate(row):
            if coefficient:
                other = family.lines[number].constant
                if other:
                    constant = constant - other * coefficient
                parts.append((number, family.kinematic_ring.constant(coefficient)))
        result.append((constant, tuple(parts)))
    return tuple(result)


def is_line(image: Image, line: int, sign: int = 1) -> bool:
    """Whether an image is exactly one line, or minus that line."""
    constant, parts = image
    return not constant and len(parts) == 1 and parts[0][0] == line and (parts[0][1] * sign).is_one()


def _monomial_matrix(forms: NDArray[np.object_], scale: int, pairs: Sequence[tuple[int, int]]) -> Any:
    rows = [[flint.fmpq(int(form[i, j]) * (1 if i == j else 2), scale) for i, j in pairs] for form in forms]
    return flint.fmpq_mat(rows)
