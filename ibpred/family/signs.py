"""Signs of the invariants: those of the Euclidean region, or of another in which the family is solved."""

from __future__ import annotations

from collections.abc import Collection
from itertools import combinations

from ibpred.exact.rational import Polynomial, Rational
from ibpred.family.definition import FamilyDefinition
from ibpred.family.polynomials import symanzik


def masses(family: FamilyDefinition) -> frozenset[str]:
    """Invariants that occur in the squared mass of a line."""
    return frozenset(name for line in family.lines for name in line.mass2.variables())


def euclidean_signs(family: FamilyDefinition) -> dict[str, int] | None:
    """Signs of the invariants for which no term of U and F of any sector is negative.

    Returns
    -------
    dict or None
        For every invariant +1 or -1, such that wherever the nonzero invariants have these signs all
        coefficients of U and F of the sector of all propagators are non-negative (and F is not zero
        unless it vanishes identically). Where several choices do, the one with the fewest deviations from
        +1 for masses and -1 for the rest, those late in the file first. None where there is none, as for
        crossed massless boxes.
    """
    first, second = symanzik(family)
    return positive_signs(family, {*first.terms.values(), *second.terms.values()})


def region_signs(family: FamilyDefinition) -> dict[str, int]:
    """Signs of the invariants in the region in which the family is solved.

    What the family file asks for. For what it leaves open, the Euclidean region where there is one. Else a
    region of scattering: the unit, squared masses and invariants without a dimension (products of velocities)
    positive, all others (momentum transfers) negative.

    Returns
    -------
    dict
        For every invariant +1 or -1.
    """
    of_masses = masses(family)
    scattering = {
        i.name: 1 if i.name == family.unit or i.name in of_masses or not i.dimension else -1
        for i in family.invariants
    }
    return {**(euclidean_signs(family) or scattering), **dict(family.region)}


def positive_signs(family: FamilyDefinition, coefficients: Collection[Rational]) -> dict[str, int] | None:
    """Signs of all invariants for which no term of any coefficient is negative; see `euclidean_signs`."""
    names = tuple(invariant.name for invariant in family.invariants)
    of_masses = masses(family)
    usual = {name: 1 if name in of_masses else -1 for name in names}
    for count in range(len(names) + 1):
        for flipped in combinations(reversed(names), count):
            signs = {name: -sign if name in flipped else sign for name, sign in usual.items()}
            if all(_is_positive(value, signs) for value in coefficients):
                return signs
    return None


def _is_positive(value: Rational, signs: dict[str, int]) -> bool:
    above = _sign(value.numerator, value, signs)
    below = _sign(value.denominator, value, signs)
    return above is not None and below is not None and above * below > 0


def _sign(polynomial: Polynomial, value: Rational, signs: dict[str, int]) -> int | None:
    """The common sign of all terms, None where they differ."""
    found = set()
    for exponents, coefficient in polynomial.to_dict().items():
        sign = 1 if coefficient > 0 else -1
        for name, exponent in zip(value.ring.names, exponents, strict=True):
            if int(exponent) % 2:
                sign *= signs[name]
        found.add(sign)
    return found.pop() if len(found) == 1 else None
