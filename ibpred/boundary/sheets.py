"""How single masters behave at the ends of a region of scattering, each read off where its own F is positive.

A family without a Euclidean region has sectors that have one: their F holds fewer invariants. Let E be a
point at which all coefficients of a sector's F are positive, P one of the region. If they are linear in the
invariants, those of F at ``P - i lambda E`` have negative imaginary parts for lambda > 0, and so have those
at ``exp(-i theta) E`` for 0 < theta < pi: a way from P to E on which F - i0 never vanishes. In one ratio it
stays in one half plane of the ratio, so what the integral can do at a letter next to the region follows from
its sheet at E: the expansion by regions where the letter borders on the positive part, the absence of a
Landau singularity where it lies beyond.
"""

from __future__ import annotations

from collections.abc import Collection, Iterator, Mapping, Sequence
from fractions import Fraction

from ibpred.boundary.approach import Approach
from ibpred.boundary.regions import ParametricFamily, Region, parametric_family, regions
from ibpred.exact.rational import Rational
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.family.polynomials import symanzik
from ibpred.iterated.transport import Point
from ibpred.sectors.order import sector_of


def behaviours(
    family: FamilyDefinition,
    powers: Powers,
    values: Mapping[str, Rational],
    variable: str,
    letters: Collection[Fraction],
    points: Sequence[Fraction],
) -> dict[Point, tuple[Region, ...]]:
    """Possible behaviours of a master at letters next to the region, without the leading terms.

    Parameters
    ----------
    family
        The family.
    powers
        The master.
    values
        The invariants in terms of one ratio in the region.
    variable
        The ratio.
    letters
        Roots of all letters, all of them linear.
    points
        The letters next to the region.

    Returns
    -------
    dict
        The points at which something is known.
    """
    _, second = symanzik(family)
    if any(not _is_linear(c) for c in second.restrict(sector_of(powers)).terms.values()):
        return {}
    found: dict[Point, tuple[Region, ...]] = {}
    for start, direction, turned in _sheets(family, values, variable, letters):
        for point in points:
            approach = Approach((), variable, (point - start) * direction)
            here = regions(turned, powers, approach)
            if here is None or (point in found and len(found[point]) <= len(here)):
                continue
            # the leading terms would have to be continued as well
            found[point] = tuple(Region(region.exponent, None) for region in here)
    return found


def _is_linear(coefficient: Rational) -> bool:
    return coefficient.is_polynomial() and all(
        sum(int(e) for e in exponents) == 1 for exponents in coefficient.numerator.to_dict()
    )


def _sheets(
    family: FamilyDefinition, values: Mapping[str, Rational], variable: str, letters: Collection[Fraction]
) -> Iterator[tuple[Fraction, int, ParametricFamily]]:
    """Letters, directions, and U and F with the distance from the letter in the place of the ratio.

    The unit comes with both signs.
    """
    sizes = {invariant.name: invariant.dimension for invariant in family.invariants}
    own = sizes[family.unit] if family.unit is not None else 1
    for sign in (1, -1):
        turned = {name: value * sign ** (sizes[name] // own) for name, value in values.items()}
        whole = parametric_family(family, turned)
        ratio = next(iter(values.values())).ring.variable(variable)
        for start in sorted(letters):
            for direction in (1, -1):
                yield (
                    start,
                    direction,
                    whole.substituted({variable: ratio * direction + start}),
                )
