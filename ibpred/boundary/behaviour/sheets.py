"""How single masters behave near a region of scattering, each read off where its own F is positive.

A family without a Euclidean region has sectors that have one: their F holds fewer invariants. Let E be a
point at which all coefficients of a sector's F are positive, P one of the region. If they are linear in the
invariants, those of F at ``P - i lambda E`` have negative imaginary parts for lambda > 0, and so have those
at ``exp(-i theta) E`` for 0 < theta < pi: a way from P to E on which F - i0 never vanishes. In one ratio it
stays in one half plane of the ratio, and all of this half plane is reached so. What the integral can do at a
letter follows from its sheet at E: the expansion by regions where the letter borders on the positive part,
the absence of a Landau singularity where it lies beyond.
"""

from __future__ import annotations

from collections.abc import Collection, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from itertools import pairwise

from ibpred.boundary.behaviour.approach import Approach, is_positive_before
from ibpred.boundary.behaviour.regions import ParametricFamily, Region, parametric_family, regions
from ibpred.exact.rational import Rational
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.family.polynomials import symanzik
from ibpred.family.units import integral_dimension
from ibpred.iterated.transport import INFINITY, Infinity, Point
from ibpred.sectors.order import sector_of


@dataclass(frozen=True)
class Sheet:
    """A part of real kinematics in one ratio where all coefficients of U and F of a sector are positive.

    Attributes
    ----------
    family
        U and F in a coordinate that runs from 0 to infinity there.
    lower, upper
        The ratio at both ends; None for infinity.
    above
        Whether the upper half plane of the ratio leads there from the region.
    """

    family: ParametricFamily
    lower: Fraction | None
    upper: Fraction | None
    above: bool

    def coordinate(self, point: Point) -> Point:
        """Where a letter lies in the sheet's coordinate."""
        if isinstance(point, Infinity):
            return Fraction(-1) if self.lower is not None and self.upper is not None else INFINITY
        if self.lower is None:
            assert self.upper is not None
            return self.upper - point
        if self.upper is None:
            return point - self.lower
        return INFINITY if point == self.upper else (point - self.lower) / (self.upper - point)

    def scaled_at(self, point: Point) -> int:
        """Power of the distance from the letter in the factor by which the invariants are scaled."""
        if self.lower is None or self.upper is None:
            return 0
        return {-1: 1, INFINITY: -1}.get(self.coordinate(point), 0)


@dataclass(frozen=True)
class Behaviours:
    """What a master may do at letters, without leading terms.

    Attributes
    ----------
    at_ends
        At the letters between which the region lies.
    at_infinity
        Where the ratio tends to minus infinity, reached through the upper half plane; None where not known.
    """

    at_ends: Mapping[Point, tuple[Region, ...]]
    at_infinity: tuple[Region, ...] | None


def behaviours(
    family: FamilyDefinition,
    powers: Powers,
    values: Mapping[str, Rational],
    variable: str,
    letters: Collection[Fraction],
) -> Behaviours:
    """What a master may do at letters near the region next to zero with a positive unit.

    Parameters
    ----------
    family
        The family.
    powers
        The master.
    values
        The invariants in terms of the ratio in the region.
    variable
        The ratio.
    letters
        Roots of all letters, all of them linear; zero among them.
    """
    _, second = symanzik(family)
    if any(not _is_linear(c) for c in second.restrict(sector_of(powers)).terms.values()):
        return Behaviours({}, None)
    ends: list[Point] = [*sorted(root for root in letters if root >= 0)[:2]]
    at_ends: dict[Point, tuple[Region, ...]] = {}
    at_infinity: tuple[Region, ...] | None = None
    for sheet in _sheets(family, powers, values, variable, letters):
        for point in ends:
            here = _at(sheet, family, powers, variable, point)
            if here is not None and (point not in at_ends or len(here) < len(at_ends[point])):
                at_ends[point] = here
        here = _at(sheet, family, powers, variable, INFINITY) if sheet.above else None
        if here is not None and (at_infinity is None or len(here) < len(at_infinity)):
            at_infinity = here
    return Behaviours(at_ends, at_infinity)


def _is_linear(coefficient: Rational) -> bool:
    return coefficient.is_polynomial() and all(
        sum(int(e) for e in exponents) == 1 for exponents in coefficient.numerator.to_dict()
    )


def _at(
    sheet: Sheet, family: FamilyDefinition, powers: Powers, variable: str, point: Point
) -> tuple[Region, ...] | None:
    """The behaviours at a letter in terms of the distance ``|x - point|``, or ``1/|x|`` at infinity."""
    found = regions(sheet.family, powers, Approach((), variable, sheet.coordinate(point)))
    if found is None:
        return None
    constant, slope = integral_dimension(family, powers)
    own = _size(family)
    scaled = sheet.scaled_at(point)
    moved = []
    for region in found:
        exponent = replace(
            region.exponent,
            power=(region.exponent.power[0] - scaled * Fraction(constant, own),),
            slope=(region.exponent.slope[0] - scaled * Fraction(slope, own),),
        )
        # the leading terms would have to be continued as well
        moved.append(Region(exponent, None))
    return tuple(moved)


def _sheets(
    family: FamilyDefinition,
    powers: Powers,
    values: Mapping[str, Rational],
    variable: str,
    letters: Collection[Fraction],
) -> Iterator[Sheet]:
    """All parts of real kinematics where the sector's U and F are positive."""
    sector = {i for i, power in enumerate(powers) if power > 0}
    sizes = {invariant.name: invariant.dimension for invariant in family.invariants}
    own = _size(family)
    x = next(iter(values.values())).ring.variable(variable)
    places: Sequence[Fraction | None] = (None, *sorted(letters), None)
    for sign in (1, -1):
        for lower, upper in pairwise(places):
            if lower is None and upper is None:
                continue
            image, scale = _image(x, lower, upper)
            turned = {
                name: value.substitute({variable: image}) * (scale * sign) ** (sizes[name] // own)
                for name, value in values.items()
            }
            whole = parametric_family(family, turned)
            coefficients = [
                c
                for terms in (whole.first, whole.second)
                for e, c in terms.items()
                if {i for i, n in enumerate(e) if n} <= sector
            ]
            if all(is_positive_before(c, variable, INFINITY) for c in coefficients):
                yield Sheet(whole, lower, upper, _is_above(sign, lower))


def _image(x: Rational, lower: Fraction | None, upper: Fraction | None) -> tuple[Rational, Rational]:
    """The ratio in terms of a coordinate from 0 to infinity, and a factor that keeps invariants linear."""
    if lower is None:
        assert upper is not None
        return upper - x, x.ring.one
    if upper is None:
        return lower + x, x.ring.one
    return (x * upper + lower) / (x + 1), x + 1


def _is_above(sign: int, lower: Fraction | None) -> bool:
    """Whether the ratio of ``P - i lambda E`` lies in the upper half plane.

    Its imaginary part has the sign of (unit of E) (ratio of P - ratio of E). To the region's own interval,
    which begins at zero, both half planes lead.
    """
    if lower == 0:
        return True
    return (sign > 0) == (lower is None or lower < 0)


def _size(family: FamilyDefinition) -> int:
    return next((i.dimension for i in family.invariants if i.name == family.unit), 1)
