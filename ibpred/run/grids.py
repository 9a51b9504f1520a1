"""Values on curves and grids."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import product
from typing import TYPE_CHECKING

import flint

from ibpred.errors import InputError, PointError
from ibpred.exact.grammar import nearest
from ibpred.exact.rational import Rational, ring
from ibpred.family.definition import Powers
from ibpred.numerics.value import Value
from ibpred.run.values import evaluate_points

if TYPE_CHECKING:
    from ibpred.run.chain import Chain

_MOST_POINTS = 100_000

Point = Mapping[str, Fraction]


@dataclass(frozen=True)
class Axis:
    """An invariant that varies, with its values."""

    name: str
    values: tuple[Fraction, ...]


@dataclass(frozen=True)
class Grid:
    """Values on a grid.

    Attributes
    ----------
    axes
        What varies.
    values
        (point, values of the integrals) in the order of the grid, the last axis fastest.
    left_out
        (point, reason) where there are no values: points on singularities.
    thresholds
        For a curve: (letter, place) of the singular points within its range, sorted.
    """

    axes: tuple[Axis, ...]
    values: tuple[tuple[Point, tuple[Value, ...]], ...]
    left_out: tuple[tuple[Point, str], ...]
    thresholds: tuple[tuple[str, Fraction | float], ...]


def evaluate_grid(
    chain: Chain,
    fixed: Point,
    axes: Sequence[Axis],
    wanted: Sequence[Powers],
    order: int,
    digits: int,
) -> Grid:
    """Values at all points of a grid.

    Points are reached from one another: the continuation to one point and the series there serve its
    neighbours too.

    Parameters
    ----------
    chain
        The family's chain.
    fixed
        The invariants that do not vary.
    axes
        Those that do; the grid is their product.
    wanted, order, digits
        As in `ibpred.run.values.evaluate_points`.

    Raises
    ------
    PointError
        If an invariant is missing, unknown or given twice, or no point of the grid has values.
    """
    family = chain.definition
    names = [invariant.name for invariant in family.invariants]
    given = [*fixed, *(axis.name for axis in axes)]
    for name in given:
        if name not in names:
            raise PointError(f"{family.name} has no invariant {name!r}; {nearest(name, names)}")
        if given.count(name) > 1:
            raise PointError(f"{name} is given twice, by --at or --grid")
    missing = [name for name in names if name not in given]
    if missing:
        raise PointError(f"no value for {', '.join(missing)}; give it with --at or --grid")
    size = 1
    for axis in axes:
        size *= len(axis.values)
    if size > _MOST_POINTS:
        raise InputError(f"a grid of {size} points is too large; at most {_MOST_POINTS} are computed at once")
    points = [
        {name: {**fixed, **dict(zip((a.name for a in axes), place, strict=True))}[name] for name in names}
        for place in product(*(axis.values for axis in axes))
    ]
    locus = chain.derivation().system.singular_locus
    regular, left_out = [], []
    for point in points:
        reason = _singular(locus, point)
        if reason is None:
            regular.append(point)
        else:
            left_out.append((point, reason))
    if not regular:
        raise PointError(f"every point of the grid is singular: {left_out[0][1]}")
    values = evaluate_points(chain, regular, wanted, order, digits)
    thresholds = _thresholds(locus, fixed, axes[0]) if len(axes) == 1 else ()
    return Grid(tuple(axes), tuple(zip(regular, values, strict=True)), tuple(left_out), thresholds)


def _singular(locus: Sequence[Rational], point: Point) -> str | None:
    for name, value in point.items():
        if value == 0:
            return f"{name} = 0 is a singularity"
    for letter in locus:
        if "d" not in letter.variables() and not letter.substitute({**point, "d": 0}):
            return f"the singularity {letter} = 0"
    return None


def _thresholds(
    locus: Sequence[Rational], fixed: Point, axis: Axis
) -> tuple[tuple[str, Fraction | float], ...]:
    """Real zeros of the singular locus along a curve, within its range."""
    target = ring((axis.name,))
    low, high = min(axis.values), max(axis.values)
    found: dict[Fraction | float, str] = {}
    for letter in locus:
        if axis.name not in letter.variables() or "d" in letter.variables():
            continue
        images = {name: target.constant(value) for name, value in fixed.items()}
        along = letter.substitute({**images, "d": target.zero, axis.name: target.variable(axis.name)})
        terms = {int(e[0]): int(c) for e, c in along.numerator.to_dict().items()}
        polynomial = flint.fmpz_poly([terms.get(k, 0) for k in range(max(terms, default=0) + 1)])
        for factor, _ in polynomial.factor()[1]:
            for place in _real_zeros(factor):
                if low <= place <= high:
                    found.setdefault(place, str(letter))
    return tuple(sorted(((letter, place) for place, letter in found.items()), key=lambda item: item[1]))


def _real_zeros(factor: flint.fmpz_poly) -> list[Fraction | float]:
    if factor.degree() == 1:
        return [Fraction(-int(factor[0]), int(factor[1]))]
    return [float(root.real) for root, _ in factor.complex_roots() if root.imag.is_zero()]
