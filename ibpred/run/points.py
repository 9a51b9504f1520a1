"""The points at which a whole run evaluates: one Euclidean, one physical where there is one."""

from __future__ import annotations

from collections.abc import Collection, Mapping
from fractions import Fraction

from ibpred.family.definition import FamilyDefinition
from ibpred.family.signs import masses

_SIZES = (Fraction(1, 3), Fraction(2, 7), Fraction(3, 11), Fraction(5, 13))


def euclidean_point(family: FamilyDefinition, signs: Mapping[str, int]) -> dict[str, Fraction]:
    """The unit at modulus one, the others at different sizes below one, all of Euclidean sign."""
    sizes = iter(_SIZES)
    point = {}
    for number, invariant in enumerate(family.invariants):
        size = Fraction(1) if invariant.name == family.unit else next(sizes, Fraction(1, 2 * number + 3))
        point[invariant.name] = signs[invariant.name] * size
    return point


def physical_point(
    family: FamilyDefinition, signs: Mapping[str, int], singular: Collection[Fraction]
) -> dict[str, Fraction] | None:
    """A point with one invariant of the other sign; None where all are squared masses.

    The unit changes sign if it is no mass, else the first invariant that is none, with a modulus beyond
    all singular points of the ratio.

    Parameters
    ----------
    family, signs
        The family and its Euclidean signs.
    singular
        Finite singular points of the ratio, to keep away from.
    """
    point = euclidean_point(family, signs)
    fixed = masses(family)
    free = [name for name in point if name not in fixed]
    if not free:
        return None
    chosen = family.unit if family.unit in free else free[0]
    assert chosen is not None
    if chosen == family.unit:
        point[chosen] = -point[chosen]
        others = [name for name in point if name != chosen]
        for size in _SIZES:
            if others and -size in singular:
                point[others[0]] = signs[others[0]] * next(s for s in _SIZES if -s not in singular)
        return point
    beyond = max([abs(a) for a in singular], default=Fraction(1)) + 2
    point[chosen] = -signs[chosen] * beyond
    return point
