"""Local series of a canonical system, order by order in eps.

With h the local coordinate (``x - c``, or ``1/x`` at infinity), d_l the other letters in h, and A_0 the
residue at the centre,

    ``h df/dh = eps (A_0 + sum_l A_l h/(h - d_l)) f``,   ``f = sum_k eps^k f^(k)``,

so ``f^(k) = sum_mj u_mj t^m L^j/j!`` with L = log h and t = h/scale, and ``f^(k)`` follows from
``f^(k-1)`` by one division by each linear factor and one integration. What stays free is one vector an
order: the coefficient of t^0 L^0. It is given at a base point, and matched elsewhere to the values at a
point in the disc. Every sum is a ball that holds its remainder (`ibpred.numerics.forms.majorant`).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from math import ceil

import flint

from ibpred.balls.context import Ball, RealBall, modulus_bound, precision, widened
from ibpred.errors import PrecisionError
from ibpred.numerics.forms.canonical import Orders
from ibpred.numerics.forms.centre import BallRows, Centre, Place
from ibpred.numerics.forms.majorant import Bounds, remainder, tail_factors
from ibpred.numerics.forms.root_kernels import convolved

Series = list[Ball] | None
"""Coefficients of t^0, t^1, ...; None is the zero series."""

Level = list[list[Series]]
"""``level[j][row]``: the coefficient of L^j/j! in one order in eps."""

_GUARD_BITS = 16
_WIDEST_RATIO = 0.95


@dataclass(frozen=True)
class _Grid:
    """How far the series go: scale of t, number of terms, 1/m, and the series of letters with roots."""

    scale: RealBall
    terms: int
    reciprocals: list[RealBall]
    kernels: list[tuple[list[Ball], BallRows]]


def from_base(centre: Centre, constants: Orders, place: Place, bits: int) -> Orders:
    """Values at a place from the constants at the centre.

    Parameters
    ----------
    centre
        The base point; tangential where it is a letter.
    constants
        ``constants[k]`` is the coefficient of h^0 L^0 of ``f^(k)``.
    place
        Point in the disc of the centre.
    bits
        Working precision.

    Raises
    ------
    PrecisionError
        If the place is not well inside the disc.
    """
    return from_base_to(centre, constants, (place,), bits)[0]


def from_base_to(centre: Centre, constants: Orders, places: Sequence[Place], bits: int) -> tuple[Orders, ...]:
    """Values at several places from the constants at the centre; the series are built once."""
    return _march(centre, lambda order, _: list(constants[order]), len(constants), places, bits)


def constants_at(centre: Centre, place: Place, values: Orders, bits: int) -> Orders:
    """Constants at the centre from values at a place in its disc (the inverse of `from_base`)."""
    constants: list[tuple[Ball, ...]] = []

    def match(order: int, particular: Sequence[Sequence[Ball]]) -> list[Ball]:
        with precision(bits):
            vector = [a - b for a, b in zip(values[order], particular[0], strict=True)]
        constants.append(tuple(vector))
        return vector

    _march(centre, match, len(values), (place,), bits)
    return tuple(constants)


def carried(centre: Centre, start: Place, values: Orders, end: Place, bits: int) -> Orders:
    """Values at one place of a disc from values at another.

    Parameters
    ----------
    centre
        Centre of the disc.
    start, values
        Where the functions are known, and their values there.
    end
        Where they are wanted; its logarithm on the branch that `start` fixes.
    bits
        Working precision.
    """
    return carried_to(centre, start, values, (end,), bits)[0]


def carried_to(
    centre: Centre, start: Place, values: Orders, ends: Sequence[Place], bits: int
) -> tuple[Orders, ...]:
    """Values at several places of a disc from values at one; the series are built once."""

    def match(order: int, particular: Sequence[Sequence[Ball]]) -> list[Ball]:
        with precision(bits):
            return [a - b for a, b in zip(values[order], particular[0], strict=True)]

    return _march(centre, match, len(values), (start, *ends), bits)[1:]


def local_levels(centre: Centre, constants: Orders, terms: int, bits: int) -> tuple[Level, ...]:
    """The series themselves, in powers of h: for each order the coefficients of ``L^j/j!``.

    Parameters
    ----------
    centre, constants
        As in `from_base`.
    terms
        How many powers of h.
    bits
        Working precision.
    """
    found: list[Level] = []
    with precision(bits):
        count = max(terms, 2)
        grid = _grid_of(centre, flint.arb(1), count)
        level: Level = []
        for vector in constants:
            level = _next_level(centre, level, grid)
            for row, value in enumerate(vector):
                series = level[0][row]
                if series is None:
                    series = [flint.acb(0)] * count
                    level[0][row] = series
                series[0] = value
            found.append(level)
    return tuple(found)


def _march(
    centre: Centre,
    free: Callable[[int, Sequence[Sequence[Ball]]], list[Ball]],
    orders: int,
    places: Sequence[Place],
    bits: int,
) -> tuple[Orders, ...]:
    """Build the orders one after the other and evaluate them at the places.

    `free` gives the constant of an order, from the values at the places of the solution without it.
    """
    with precision(bits):
        grid = _grid(centre, places, bits)
        ratios = [_ratio(centre, place) for place in places]
        powers = [_powers(place.h / grid.scale, grid.terms) for place in places]
    if centre.radius is None:
        factors = [[flint.arb(0)] * (orders + 1) for _ in places]
    else:
        factors = [tail_factors(ratio, grid.terms, orders + 1) for ratio in ratios]
    values: list[list[tuple[Ball, ...]]] = [[] for _ in places]
    level: Level = []
    bounds: Bounds = []
    for order in range(orders):
        with precision(bits):
            level = _next_level(centre, level, grid)
        heads = [[_head_bound(series) for series in part] for part in level]
        bounds = centre.majorant.next_order(heads, bounds)
        particular = [
            _evaluate(level, bounds, place, of_place, tail, bits)
            for place, of_place, tail in zip(places, powers, factors, strict=True)
        ]
        constant = free(order, particular)
        with precision(bits):
            for row, value in enumerate(constant):
                if value.is_zero():
                    continue
                series = level[0][row]
                if series is None:
                    series = [flint.acb(0)] * grid.terms
                    level[0][row] = series
                series[0] = value
                bounds[0][0][row] = modulus_bound(value)
            for found, vector in zip(values, particular, strict=True):
                found.append(tuple(a + b for a, b in zip(vector, constant, strict=True)))
    return tuple(tuple(found) for found in values)


def _ratio(centre: Centre, place: Place) -> RealBall:
    if centre.radius is None:
        return flint.arb(0)
    return flint.arb((place.h.abs_upper() / centre.radius).upper())


def _grid(centre: Centre, places: Sequence[Place], bits: int) -> _Grid:
    scale = flint.arb(0)
    for place in places:
        scale = scale.max(place.h.abs_upper())
    if centre.radius is None:
        return _Grid(flint.arb(1), 1, [flint.arb(0)], [])
    ratio = (scale / centre.radius).upper()
    if not ratio < _WIDEST_RATIO:
        raise PrecisionError(
            f"a local series was asked for at {ratio.str(4)} of its radius of convergence; raise the "
            "working precision, or choose a point farther from the singular points"
        )
    fall = -float(ratio.log()) / 0.6931471805599453
    terms = max(2, ceil((bits + _GUARD_BITS) / fall)) + 1
    return _grid_of(centre, scale, terms)


def _grid_of(centre: Centre, scale: RealBall, terms: int) -> _Grid:
    kernels = [(kernel.coefficients(scale, terms), rows) for kernel, rows in centre.kernels]
    return _Grid(scale, terms, [flint.arb(0)] + [1 / flint.arb(m) for m in range(1, terms)], kernels)


def _next_level(centre: Centre, previous: Level, grid: _Grid) -> Level:
    """The solution of one order whose coefficient of t^0 L^0 is zero."""
    depth = len(previous) + (1 if centre.residue or not previous else 0)
    level: Level = [[None] * centre.size for _ in range(depth)]
    sources: Level = [_source(centre, part, grid) for part in previous]
    above: list[Series] = [None] * centre.size
    for j in reversed(range(len(previous))):
        current: list[Series] = [None] * centre.size
        for row in range(centre.size):
            source, higher = sources[j][row], above[row]
            if source is None and higher is None:
                continue
            if source is not None and not source[0].is_zero():
                head = level[j + 1][row]
                if head is None:
                    head = [flint.acb(0)] * grid.terms
                    level[j + 1][row] = head
                head[0] = source[0]
            current[row] = _integrated(source, higher, grid)
        level[j] = current
        above = current
    return level


def _integrated(source: Series, higher: Series, grid: _Grid) -> list[Ball]:
    """``u_m = (r_m - u'_m)/m`` for m >= 1, u' the coefficient of the next power of L."""
    if higher is None:
        assert source is not None
        series = [a * b for a, b in zip(source, grid.reciprocals, strict=True)]
    elif source is None:
        series = [-a * b for a, b in zip(higher, grid.reciprocals, strict=True)]
    else:
        series = [(a - c) * b for a, c, b in zip(source, higher, grid.reciprocals, strict=True)]
    series[0] = flint.acb(0)
    return series


def _source(centre: Centre, part: Sequence[Series], grid: _Grid) -> list[Series]:
    """``(A_0 + sum_l A_l h/(h - d_l)) g`` for the coefficient g of one power of L."""
    found: list[Series] = [None] * centre.size
    for row, entries in centre.residue:
        found[row] = _combined(entries, part)
    for inverse, rows in centre.others:
        factor = inverse * grid.scale
        for row, entries in rows:
            vector = _combined(entries, part)
            if vector is None:
                continue
            divided = _divided(vector, factor)
            _add(found, row, divided)
    for kernel, rows in grid.kernels:
        for row, entries in rows:
            vector = _combined(entries, part)
            if vector is not None:
                _add(found, row, convolved(vector, kernel))
    return found


def _add(found: list[Series], row: int, series: list[Ball]) -> None:
    before = found[row]
    found[row] = series if before is None else [a + b for a, b in zip(before, series, strict=True)]


def _combined(entries: Sequence[tuple[int, Ball]], part: Sequence[Series]) -> Series:
    total: Series = None
    for column, value in entries:
        series = part[column]
        if series is None:
            continue
        if total is None:
            total = [value * a for a in series]
        else:
            total = [b + value * a for a, b in zip(series, total, strict=True)]
    return total


def _divided(series: list[Ball], factor: Ball) -> list[Ball]:
    """``t/(t - d) v(t)`` with factor = 1/d: ``u_m = (u_{m-1} - v_{m-1})/d``."""
    last = flint.acb(0)
    found = [last]
    for value in series[:-1]:
        last = (last - value) * factor
        found.append(last)
    return found


def _head_bound(series: Series) -> RealBall:
    return flint.arb(0) if series is None else modulus_bound(series[0])


def _evaluate(
    level: Level,
    bounds: Bounds,
    place: Place,
    powers: Sequence[Ball],
    factors: Sequence[RealBall],
    bits: int,
) -> list[Ball]:
    with precision(bits):
        size = modulus_bound(place.logarithm)
        weights = [flint.acb(1)]
        for j in range(1, len(level)):
            weights.append(weights[-1] * place.logarithm / j)
        vector = []
        for row in range(len(level[0])):
            total = flint.acb(0)
            for part, weight in zip(level, weights, strict=True):
                series = part[row]
                if series is not None:
                    total = total + weight * _dot(series, powers)
            vector.append(total)
    return [widened(value, remainder(bounds, size, factors, row), bits) for row, value in enumerate(vector)]


def _powers(t: Ball, count: int) -> list[Ball]:
    # each power by itself: Horner's rule would widen complex balls by up to sqrt(2) a term
    return [t**m if m else flint.acb(1) for m in range(count)]


def _dot(series: Sequence[Ball], powers: Sequence[Ball]) -> Ball:
    total = flint.acb(0)
    for a, b in zip(series, powers, strict=True):
        total = total + a * b
    return total
