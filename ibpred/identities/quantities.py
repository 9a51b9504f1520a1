"""Linear combinations of integrals that are defined as unknowns of their own."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from ibpred.exact.rational import Rational, Ring
from ibpred.family.definition import Powers
from ibpred.identities.templates import Template, common_denominator

Terms = Mapping[tuple[int, ...], int]
"""A polynomial: exponents over the internal ring's variables -> integer."""

Integral = tuple[int, Powers]
"""Number of the family, of several that are reduced together, and the powers."""


@dataclass(frozen=True)
class Quantity:
    """``weight * quantity = sum coefficient * integral``, e.g. the derivative of a master.

    Attributes
    ----------
    name
        For messages.
    weight
        A polynomial, not zero.
    terms
        Integrals, each once, by their powers, and their polynomial coefficients.
    families
        For each term the number of its family, where there are several; empty where there is one.
    """

    name: str
    weight: Terms
    terms: tuple[tuple[Powers, Terms], ...]
    families: tuple[int, ...] = ()

    @property
    def integrals(self) -> tuple[Integral, ...]:
        """The integrals of the terms."""
        families = self.families or (0,) * len(self.terms)
        return tuple((family, powers) for family, (powers, _) in zip(families, self.terms, strict=True))


def template_at(template: Template, powers: Powers) -> Quantity:
    """The quantity that a template defines at given powers."""
    place = (*powers, 1)
    terms = []
    for shift, values in zip(template.shifts.tolist(), template.values.tolist(), strict=True):
        polynomial = {}
        for exponents, form in zip(template.monomials, values, strict=True):
            value = sum(c * a for c, a in zip(form, place, strict=True))
            if value:
                polynomial[exponents] = value
        if polynomial:
            terms.append((tuple(a + s for a, s in zip(powers, shift, strict=True)), polynomial))
    weight = {e: int(c) for e, c in zip(template.monomials, template.weight.tolist(), strict=True) if c}
    return Quantity(f"{template.name} of {powers}", weight, tuple(terms))


def combination(name: str, terms: Mapping[Powers, Rational], ring: Ring) -> Quantity:
    """A sum of integrals with coefficients in the internal ring."""
    common = common_denominator(terms.values(), ring)

    def polynomial(value: object) -> Terms:
        return {tuple(map(int, e)): int(c) for e, c in value.to_dict().items()}  # type: ignore[attr-defined]

    found = tuple(
        (powers, polynomial(value.numerator * (common / value.denominator)))
        for powers, value in sorted(terms.items())
        if value
    )
    return Quantity(name, polynomial(common), found)
