"""The points at which a whole run evaluates: one Euclidean, one physical, or two of the same region."""

from __future__ import annotations

from collections.abc import Collection, Mapping
from fractions import Fraction
from math import ceil

import flint

from ibpred.exact.rational import Rational, ring
from ibpred.family.definition import FamilyDefinition
from ibpred.family.signs import masses

_SIZES = (Fraction(1, 3), Fraction(2, 7), Fraction(3, 11), Fraction(5, 13))


def sample_points(
    family: FamilyDefinition, signs: Mapping[str, int], euclidean: bool, locus: Collection[Rational]
) -> tuple[dict[str, Fraction], ...]:
    """One Euclidean point, and a physical one where there is one; or two points of the solution's region.

    Parameters
    ----------
    family, signs
        The family, and the signs of the region in which it is solved.
    euclidean
        Whether that region is Euclidean.
    locus
        Irreducible polynomials in the invariants: where the differential equations are singular.
    """
    if not euclidean:
        return points_in_region(family, signs, locus)
    further = physical_point(family, signs, singular_ratios(family, signs, locus))
    first = euclidean_point(family, signs)
    return (first,) if further is None else (first, further)


def euclidean_point(family: FamilyDefinition, signs: Mapping[str, int]) -> dict[str, Fraction]:
    """The unit at modulus one, the others at different sizes below one, all of Euclidean sign."""
    sizes = iter(_SIZES)
    point = {}
    for number, invariant in enumerate(family.invariants):
        size = Fraction(1) if invariant.name == family.unit else next(sizes, Fraction(1, 2 * number + 3))
        point[invariant.name] = signs[invariant.name] * size
    return point


def points_in_region(
    family: FamilyDefinition, signs: Mapping[str, int], locus: Collection[Rational]
) -> tuple[dict[str, Fraction], dict[str, Fraction]]:
    """Two points in the region of the solution of a family without a Euclidean region.

    Parameters
    ----------
    family, signs
        The family, and the signs of that region.
    locus
        As for `sample_points`.
    """
    first = euclidean_point(family, signs)
    other = next((name for name in first if name != family.unit), None)
    nearest = Fraction(1)
    if other is not None:
        zeros = [z for letter in locus for z in zeros_along(letter, first, other)]
        sizes = [signs[other] * z for z in zeros if isinstance(z, Fraction)]
        nearest = min([z for z in sizes if z > 0], default=Fraction(1))
    scaled = {name: v if name == family.unit else v * nearest for name, v in first.items()}
    return scaled, {name: v if name == family.unit else 2 * v for name, v in scaled.items()}


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
    chosen = free_invariant(family)
    if chosen is None:
        return None
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


def free_invariant(family: FamilyDefinition) -> str | None:
    """The invariant that changes sign: the unit if it is no mass, else the first that is none."""
    fixed = masses(family)
    free = [invariant.name for invariant in family.invariants if invariant.name not in fixed]
    if not free:
        return None
    return family.unit if family.unit in free else free[0]


def singular_ratios(
    family: FamilyDefinition, signs: Mapping[str, int], locus: Collection[Rational]
) -> list[Fraction]:
    """What `physical_point` keeps away from, read off a singular locus; irrational places are rounded up."""
    point = euclidean_point(family, signs)
    chosen = free_invariant(family)
    others = [name for name in point if name != chosen]
    if chosen is None or (chosen == family.unit and not others):
        return []
    if chosen == family.unit:
        point[chosen] = -point[chosen]
        along = [z for letter in locus for z in zeros_along(letter, point, others[0])]
        return [-signs[others[0]] * z for z in along if isinstance(z, Fraction)]
    along = [z for letter in locus for z in zeros_along(letter, point, chosen)]
    return [abs(z) if isinstance(z, Fraction) else Fraction(ceil(abs(z))) for z in along]


def zeros_along(letter: Rational, point: Mapping[str, Fraction], name: str) -> list[Fraction | float]:
    """Real zeros of a letter where one invariant varies and the others stay at a point; d is set to zero."""
    target = ring((name,))
    images = {other: target.constant(value) for other, value in point.items() if other != name}
    along = letter.substitute({**images, "d": target.zero, name: target.variable(name)})
    terms = {int(e[0]): int(c) for e, c in along.numerator.to_dict().items()}
    polynomial = flint.fmpz_poly([terms.get(k, 0) for k in range(max(terms, default=0) + 1)])
    return [zero for factor, _ in polynomial.factor()[1] for zero in _real_zeros(factor)]


def _real_zeros(factor: flint.fmpz_poly) -> list[Fraction | float]:
    if factor.degree() == 1:
        return [Fraction(-int(factor[0]), int(factor[1]))]
    return [float(root.real) for root, _ in factor.complex_roots() if root.imag.is_zero()]
