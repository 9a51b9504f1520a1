"""Values on curves and grids."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import product

from ibpred.errors import InputError, OutOfTimeError, PointError
from ibpred.exact.grammar import nearest
from ibpred.exact.rational import Rational
from ibpred.family.definition import Powers
from ibpred.numerics.value import Value
from ibpred.progress import never
from ibpred.run.chain.chain import Chain
from ibpred.run.values.evaluate import evaluate_points
from ibpred.run.values.points import zeros_along

_MOST_POINTS = 100_000
_PORTION = 8  # points between two looks at the deadline

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
        (point, reason) where there are no values: points on singularities where integrals have no limit.
    thresholds
        For a curve: (letter, place) of the singular points within its range, sorted.
    stopped
        Why there are no values at the last points, for want of time; None where all were reached.
    """

    axes: tuple[Axis, ...]
    values: tuple[tuple[Point, tuple[Value, ...]], ...]
    left_out: tuple[tuple[Point, str], ...]
    thresholds: tuple[tuple[str, Fraction | float], ...]
    stopped: OutOfTimeError | None = None


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
        As in `ibpred.run.values.evaluate.evaluate_points`.

    Raises
    ------
    PointError
        If an invariant is missing, unknown or given twice, or no point of the grid has values.
    OutOfTimeError
        If the time allowed is over before any point has values.
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
    regular = [point for point in points if _singular(locus, point) is None]
    values, stopped = _in_time(chain, regular, wanted, order, digits) if regular else ((), None)
    reached = dict(zip(map(_key, regular), values, strict=False))
    left_out: list[tuple[Point, str]] = []
    for point in points:
        reason = _singular(locus, point)
        if reason is None and _key(point) not in reached:
            left_out.append((point, "the time allowed was over"))
        if reason is None:
            continue
        try:
            reached[_key(point)] = _limit(chain, point, wanted, order, digits, stopped)
        except (PointError, OutOfTimeError) as error:
            left_out.append((point, f"{reason}; {error}"))
    if not reached:
        raise PointError(f"every point of the grid is singular: {left_out[0][1]}")
    thresholds = _thresholds(locus, fixed, axes[0]) if len(axes) == 1 else ()
    with_values = tuple((point, reached[_key(point)]) for point in points if _key(point) in reached)
    return Grid(tuple(axes), with_values, tuple(left_out), thresholds, stopped)


def _key(point: Point) -> tuple[Fraction, ...]:
    return tuple(point.values())


def _limit(
    chain: Chain,
    point: Point,
    wanted: Sequence[Powers],
    order: int,
    digits: int,
    stopped: OutOfTimeError | None,
) -> tuple[Value, ...]:
    """Values on a singularity, where there are any and time is left."""
    if stopped is not None:
        raise stopped
    return evaluate_points(chain, (point,), wanted, order, digits)[0]


def _in_time(
    chain: Chain, points: Sequence[Point], wanted: Sequence[Powers], order: int, digits: int
) -> tuple[tuple[tuple[Value, ...], ...], OutOfTimeError | None]:
    """Values at the points; with a deadline in portions, and those that were reached."""
    size = len(points) if chain.expired is never else _PORTION
    found: tuple[tuple[Value, ...], ...] = ()
    for start in range(0, len(points), size):
        try:
            found += evaluate_points(chain, points[start : start + size], wanted, order, digits)
        except OutOfTimeError as over:
            if not found:
                raise
            return found, OutOfTimeError(over.during, f"{len(found)} of {len(points)} points are given.")
    return found, None


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
    low, high = min(axis.values), max(axis.values)
    found: dict[Fraction | float, str] = {}
    for letter in locus:
        if axis.name not in letter.variables() or "d" in letter.variables():
            continue
        for place in zeros_along(letter, fixed, axis.name):
            if low <= place <= high:
                found.setdefault(place, str(letter))
    return tuple(sorted(((letter, place) for place, letter in found.items()), key=lambda item: item[1]))
