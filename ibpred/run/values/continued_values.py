"""Routes to numbers that need no epsilon-form in the ratios: continuation from a point where the masters are
known, or the auxiliary mass at the point itself.

Points with rigorous radii come from an epsilon-form in other variables or from the regions at a corner of the
kinematics, others from the auxiliary-mass method; their errors are estimates, and so are those of the values.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

import flint

from ibpred.balls.accuracy import bits_for, is_accurate
from ibpred.balls.context import Ball, complex_ball, precision
from ibpred.balls.decimal import ball_of_decimal, decimal_ball
from ibpred.errors import PointError, PrecisionError, UnfinishedError
from ibpred.exact.rational import Rational
from ibpred.family.definition import Powers
from ibpred.family.signs import euclidean_signs
from ibpred.iterated.constants.series import eps_valuation, laurent
from ibpred.numerics.forms.power_series import EPSILON
from ibpred.numerics.laurent.crossings import crossings
from ibpred.numerics.laurent.expanded import ExpandedSystem, expanded_system
from ibpred.numerics.laurent.laurent_line import (
    carry_laurent,
    laurent_line,
    line_depth,
    regular_locus,
    spread,
)
from ibpred.numerics.value import Route, Value
from ibpred.run.chain.chain import Chain
from ibpred.run.constants.known_points import KnownPoint, known_points, new_point
from ibpred.run.values.corner_start import corner_values
from ibpred.run.values.lifted_point import lifted_point
from ibpred.run.values.points import euclidean_point

_SPARE_DIGITS = 12  # of a known point, lost on the way to others
_SPARE_BITS = 120
_ROUNDS = 2
_STATION_DIGITS = 4  # of a point reached before, lost on the way to its neighbours
_NEIGHBOURS = 3

Point = Mapping[str, Fraction]
Masters = tuple[Mapping[int, Ball], ...]


@dataclass(frozen=True)
class Found:
    """The masters at a point, how they were obtained, and whether their radii are rigorous."""

    masters: Masters
    route: Route
    certified: bool = False


@dataclass(frozen=True)
class Station:
    """A point at which the masters are at hand through some power of eps."""

    point: Point
    found: Found


def continued_values(
    chain: Chain, points: Sequence[Point], wanted: Sequence[Powers], order: int, digits: int
) -> tuple[tuple[Value, ...], ...]:
    """Values at points without an epsilon-form; see `ibpred.run.values.evaluate.evaluate_points`.

    Where the digits wanted are not reached after a second attempt with more, the values say how many were.

    Raises
    ------
    PointError
        If a point is incomplete or singular.
    UnfinishedError
        If the auxiliary-mass method does not apply to the family.
    """
    values = []
    stations: list[Station] = []
    for done, point in enumerate(points):
        chain.progress.advance(done, len(points))
        found, station = _at_point(chain, point, wanted, order, digits, stations)
        values.append(found)
        stations.append(station)
    return tuple(values)


def _at_point(
    chain: Chain,
    point: Point,
    wanted: Sequence[Powers],
    order: int,
    digits: int,
    stations: Sequence[Station],
) -> tuple[tuple[Value, ...], Station]:
    _check_point(chain, point)
    count = len(chain.masters().masters)
    names = list(wanted) if wanted else list(chain.masters().masters)
    if wanted:
        table = chain.reduction(tuple(dict.fromkeys(wanted)))
        sums = [_coefficients(chain, dict(table.reductions[powers]), point) for powers in wanted]
    else:
        sums = [{index: EPSILON.one} for index in range(count)]
    needed = max((order - eps_valuation(c) for total in sums for c in total.values()), default=order)
    asked = digits
    results: list[dict[int, Ball]] = []
    for round_ in range(_ROUNDS):
        bits = bits_for(asked) + _SPARE_BITS
        found = masters_at(chain, point, needed, asked, bits, () if round_ else stations)
        results = [_combined(total, found.masters, order, bits) for total in sums]
        missing = [ball for result in results for ball in result.values() if not is_accurate(ball, digits)]
        if not missing or round_ == _ROUNDS - 1:
            break
        chain.progress.stage(f"{len(missing)} coefficients lack digits; once more with more")
        asked += digits // 2 + _SPARE_DIGITS
    values = tuple(
        Value(
            tuple(powers),
            {k: decimal_ball(ball, digits + 2) for k, ball in result.items()},
            certified=found.certified,
            route=found.route,
        )
        for powers, result in zip(names, results, strict=True)
    )
    return values, Station(point, found)


def _check_point(chain: Chain, point: Point) -> None:
    family = chain.definition
    names = [invariant.name for invariant in family.invariants]
    unknown = [name for name in point if name not in names]
    if unknown:
        raise PointError(
            f"{family.name} has no invariant {unknown[0]!r}; known are {', '.join(names) or 'none'}"
        )
    missing = [name for name in names if name not in point]
    if missing:
        raise PointError(f"the point lacks a value for {', '.join(missing)}; give every invariant")
    for letter in regular_locus(chain.derivation().system) if names else ():
        if not letter.substitute({**point, "d": 0}):
            raise PointError(f"the point lies on the singularity {letter} = 0; choose another point")


def _coefficients(chain: Chain, combination: Mapping[int, Rational], point: Point) -> dict[int, Rational]:
    images = {name: EPSILON.constant(value) for name, value in point.items()}
    images["d"] = EPSILON.variable("eps") * -2 + chain.definition.dimension
    found = {}
    for index, coefficient in combination.items():
        try:
            value = coefficient.substitute(images)
        except ZeroDivisionError:
            raise PointError(
                f"the reduction is singular at this point: {coefficient.denominator} vanishes; choose "
                "another point"
            ) from None
        if value:
            found[index] = value
    return found


def _combined(total: Mapping[int, Rational], masters: Masters, order: int, bits: int) -> dict[int, Ball]:
    """Coefficients through ``eps^order`` of a sum over the masters, without leading balls that hold zero."""
    sums: dict[int, Ball] = {}
    with precision(bits):
        for index, coefficient in total.items():
            master = masters[index]
            if not master:
                continue
            series = laurent(coefficient, order - min(master))
            for i, factor in enumerate(series.coefficients):
                if not factor:
                    continue
                ball = complex_ball(factor.to_fraction(), 0, bits)
                for k, value in master.items():
                    power = series.start + i + k
                    if power <= order:
                        sums[power] = sums.get(power, flint.acb(0)) + ball * value
    kept: dict[int, Ball] = {}
    for power, value in sorted(sums.items()):
        if kept or not value.contains(0):
            kept[power] = value
    return kept


def masters_at(
    chain: Chain, point: Point, highest: int, digits: int, bits: int, stations: Sequence[Station] = ()
) -> Found:
    """The masters through ``eps^highest``, by continuation where a way leads from a known point.

    Parameters
    ----------
    chain
        The family's chain.
    point
        A regular point.
    highest
        Highest power of eps.
    digits
        Digits wanted, where they have to be chosen beforehand.
    bits
        Working precision.
    stations
        Points that were reached before, to as high a power of eps.

    Raises
    ------
    UnfinishedError
        If no way is open.
    """
    signs = euclidean_signs(chain.definition)
    system = chain.derivation().system
    if not system.variables:
        return _by_auxiliary_mass(chain, point, highest, digits, highest, bits)
    near = _nearest(chain, stations, point, signs, digits)
    if near is not None:
        return _from_station(chain, near, point, highest, signs, bits)
    top = highest + spread(expanded_system(system, 0))
    for start in _certain_starts(chain, highest, top, digits + _SPARE_DIGITS, bits):
        if start.point == dict(point):
            return start.found
        if list(_by_way(chain, [start], point, signs)):
            return _from_station(chain, start, point, highest, signs, bits)
    for known in known_points(chain):
        if dict(known.point) == dict(point) and known.order >= highest and known.digits >= digits:
            return Found(_balls(known, highest, bits), Route.AUXILIARY_MASS)
    usable = [
        _station(known, bits)
        for known in known_points(chain)
        if known.order >= top and known.digits >= digits + _SPARE_DIGITS
    ]
    for start in _by_way(chain, usable, point, signs):
        return _from_station(chain, start, point, highest, signs, bits)
    if signs is not None:
        base = euclidean_point(chain.definition, signs)
        empty = Station(base, Found((), Route.AUXILIARY_MASS))
        if base != dict(point) and list(_by_way(chain, [empty], point, signs)):
            start = _station(new_point(chain, base, top, digits + _SPARE_DIGITS), bits)
            return _from_station(chain, start, point, highest, signs, bits)
    return _by_auxiliary_mass(chain, point, top, digits + _SPARE_DIGITS, highest, bits)


def _by_auxiliary_mass(chain: Chain, point: Point, top: int, digits: int, highest: int, bits: int) -> Found:
    return Found(_balls(new_point(chain, point, top, digits), highest, bits), Route.AUXILIARY_MASS)


def _station(known: KnownPoint, bits: int) -> Station:
    return Station(dict(known.point), Found(_balls(known, known.order, bits), Route.CONTINUATION))


def _certain_starts(chain: Chain, highest: int, top: int, digits: int, bits: int) -> Iterator[Station]:
    """Points where the masters are known with rigorous radii."""
    if not chain.in_ratios():
        try:
            known = lifted_point(chain, top, digits)
        except PrecisionError:
            raise
        except UnfinishedError as error:
            chain.progress.stage(f"no values from an epsilon-form ({error})")
        else:
            masters = _balls(known, known.order, bits)
            yield Station(dict(known.point), Found(masters, Route.EPSILON_FORM, True))
    try:
        place, values = corner_values(chain, highest, bits)
    except PrecisionError:
        raise
    except UnfinishedError as error:
        chain.progress.stage(f"no values from regions ({error})")
    else:
        yield Station(dict(place), Found(values, Route.REGIONS, True))


def _nearest(
    chain: Chain,
    stations: Sequence[Station],
    point: Point,
    signs: Mapping[str, int] | None,
    digits: int,
) -> Station | None:
    """The nearest point reached before, if no singularity lies between and it has digits to spare."""
    sharp = [
        station
        for station in stations
        if all(
            is_accurate(ball, digits + _STATION_DIGITS)
            for master in station.found.masters
            for ball in master.values()
        )
    ]
    sharp.sort(key=lambda station: _distance(station.point, point))
    locus = regular_locus(chain.derivation().system)
    for station in sharp[:_NEIGHBOURS]:
        if station.point == point or not crossings(locus, station.point, point, _turns(chain, signs)):
            return station
    return None


def _distance(one: Point, other: Point) -> float:
    return sum(float(abs(one[name] - other[name]) / (abs(one[name]) + abs(other[name]) or 1)) for name in one)


def _from_station(
    chain: Chain,
    start: Station,
    point: Point,
    highest: int,
    signs: Mapping[str, int] | None,
    bits: int,
) -> Found:
    if start.point == point:
        return start.found
    masters = _carried(chain, start, point, highest, signs, bits)
    return Found(masters, start.found.route, start.found.certified)


def _turns(chain: Chain, signs: Mapping[str, int] | None) -> dict[str, int]:
    if signs is None:
        return dict.fromkeys((i.name for i in chain.definition.invariants), 0)
    return {name: -sign for name, sign in signs.items()}


def _by_way(
    chain: Chain, known: Sequence[Station], point: Point, signs: Mapping[str, int] | None
) -> Iterator[Station]:
    """Known points from which a line leads to the point, those with the fewest crossings first.

    Without a Euclidean region the sides are not known, so only lines without crossings count.
    """
    locus = regular_locus(chain.derivation().system)
    ways = []
    for place, candidate in enumerate(known):
        try:
            passed = crossings(locus, candidate.point, point, _turns(chain, signs))
        except PointError:
            continue
        if signs is None and passed:
            continue
        ways.append((len(passed), place, candidate))
    for _, _, candidate in sorted(ways, key=lambda way: way[:2]):
        yield candidate


def _balls(known: KnownPoint, highest: int, bits: int) -> Masters:
    return tuple(
        {k: ball_of_decimal(ball, bits) for k, ball in value.items() if k <= highest}
        for value in known.values
    )


def _carried(
    chain: Chain,
    start: Station,
    point: Point,
    highest: int,
    signs: Mapping[str, int] | None,
    bits: int,
) -> Masters:
    chain.progress.stage("continuation")
    system = chain.derivation().system
    values = start.found.masters
    shifts = expanded_system(system, 0).shifts
    lowest = min((k + shift for value, shift in zip(values, shifts, strict=True) for k in value), default=0)
    expanded: ExpandedSystem = expanded_system(system, line_depth(shifts, lowest, highest))
    line = laurent_line(expanded, regular_locus(system), start.point, point, _turns(chain, signs))
    carried = carry_laurent(line, values, lowest, highest, bits, chain.progress)
    for value in carried:
        for ball in value.values():
            if not ball.is_finite():
                raise PrecisionError("the continuation lost all digits; ask for more digits")
    return carried
