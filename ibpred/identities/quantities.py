"""Linear combinations of integrals that are defined as unknowns of their own."""

from __future__ import annotations

import hashlib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import flint
import numpy as np

from ibpred.errors import UnfinishedError
from ibpred.exact.polynomial import Polynomial, plain_terms
from ibpred.exact.rational import Rational, Ring
from ibpred.family.definition import Powers
from ibpred.identities.templates import LARGEST, Template

_BASE = 2**40  # of numerators whose integers do not fit the engine

Terms = Mapping[tuple[int, ...], int]
"""A polynomial: exponents over the internal ring's variables -> integer."""

Integral = tuple[int, Powers]
"""Number of the family, of several that are reduced together, and the powers."""


@dataclass(frozen=True)
class Quantity:
    """``weight * quantity = sum coefficient * integral + sum coefficient * earlier quantity``.

    E.g. the derivative of a master, or a part of an amplitude.

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
    parts
        Numbers of earlier quantities, of those defined together, and their coefficients.
    """

    name: str
    weight: Terms
    terms: tuple[tuple[Powers, Terms], ...]
    families: tuple[int, ...] = ()
    parts: tuple[tuple[int, Terms], ...] = ()

    @property
    def integrals(self) -> tuple[Integral, ...]:
        """The integrals of the terms."""
        families = self.families or (0,) * len(self.terms)
        return tuple((family, powers) for family, (powers, _) in zip(families, self.terms, strict=True))


def template_at(template: Template, powers: Powers) -> Quantity:
    """The quantity that a template defines at given powers."""
    place = np.array([*powers, 1], dtype=np.int64)
    values = template.values @ place
    shifted = template.shifts + place[:-1]
    filled = values.any(axis=1)
    terms = []
    for target, row in zip(shifted[filled].tolist(), values[filled].tolist(), strict=True):
        polynomial = {e: c for e, c in zip(template.monomials, row, strict=True) if c}
        terms.append((tuple(target), polynomial))
    weight = {e: int(c) for e, c in zip(template.monomials, template.weight.tolist(), strict=True) if c}
    return Quantity(f"{template.name} of {powers}", weight, tuple(terms))


def fingerprint(quantities: Sequence[Quantity]) -> str:
    """SHA-256 of quantities, in hexadecimal; it does not depend on the order within a polynomial."""
    found = hashlib.sha256()
    for quantity in quantities:
        terms = [(powers, sorted(polynomial.items())) for powers, polynomial in quantity.terms]
        parts = [(number, sorted(polynomial.items())) for number, polynomial in quantity.parts]
        whole = (quantity.name, sorted(quantity.weight.items()), terms, quantity.families, parts)
        found.update(repr(whole).encode())
    return found.hexdigest()


def combination(
    name: str, terms: Mapping[Integral, Rational], ring: Ring, first: int
) -> tuple[Quantity, ...]:
    """A sum of integrals as a chain of quantities, the last of which is the sum.

    Terms with the same denominator make one part; a denominator whose integers are too large for the
    engine is divided out factor by factor, and numerators with large integers are written in a base.

    Parameters
    ----------
    name
        Of the sum.
    terms
        Coefficients in the internal ring.
    ring
        The internal ring.
    first
        Number of the first quantity of the chain among those that are defined together.

    Raises
    ------
    UnfinishedError
        If a factor of a denominator has an integer that is too large.
    """
    groups: dict[str, tuple[Polynomial, dict[Integral, Terms]]] = {}
    for integral, value in sorted(terms.items()):
        if value:
            below, inside = groups.setdefault(str(value.denominator), (value.denominator, {}))
            inside[integral] = plain_terms(value.numerator)
    one: Terms = {(0,) * len(ring.names): 1}
    chain: list[Quantity] = []
    ends: list[int] = []

    def add(weight: Terms, inside: Mapping[Integral, Terms], parts: Sequence[tuple[int, Terms]]) -> int:
        own = tuple((powers, polynomial) for (_, powers), polynomial in inside.items())
        families = tuple(number for number, _ in inside)
        chain.append(Quantity(name, weight, own, families, tuple(parts)))
        return first + len(chain) - 1

    for below, inside in groups.values():
        weights = _divisors(name, below, ring)
        high = {i: {e: _high(c) for e, c in p.items() if _high(c)} for i, p in inside.items()}
        digits = [inside]
        while any(high.values()):
            digits[-1] = {i: {e: c - _BASE * _high(c) for e, c in p.items()} for i, p in digits[-1].items()}
            digits.append({i: p for i, p in high.items() if p})
            high = {i: {e: _high(c) for e, c in p.items() if _high(c)} for i, p in digits[-1].items()}
        last: list[tuple[int, Terms]] = []
        for place in range(len(digits) - 1, -1, -1):
            found = add(weights[0] if place == 0 else one, _nonzero(digits[place]), last)
            last = [(found, {(0,) * len(ring.names): _BASE})]
        for weight in weights[1:]:
            found = add(weight, {}, [(found, one)])
        ends.append(found)
    if len(ends) != 1:
        add(one, {}, [(end, one) for end in ends])
    return tuple(chain)


def _high(c: int) -> int:
    """What is left of an integer after its last digit in the base, which keeps its sign."""
    return 0 if abs(c) <= LARGEST else (abs(c) // _BASE) * (1 if c > 0 else -1)


def _nonzero(inside: Mapping[Integral, Terms]) -> dict[Integral, Terms]:
    kept = {i: {e: c for e, c in p.items() if c} for i, p in inside.items()}
    return {i: p for i, p in kept.items() if p}


def _divisors(name: str, below: Polynomial, ring: Ring) -> list[Terms]:
    """Polynomials with small integers whose product is a denominator."""
    whole = plain_terms(below)
    if max(abs(c) for c in whole.values()) <= LARGEST:
        return [whole]
    content, factors = below.factor()
    found: list[Terms] = [plain_terms(item) for item, power in factors for _ in range(int(power))]
    constant = (0,) * len(ring.names)
    found += [{constant: int(p)} for p, power in flint.fmpz(content).factor() for _ in range(int(power))]
    for terms in found:
        largest = max(abs(c) for c in terms.values())
        if largest > LARGEST:
            raise UnfinishedError(
                f"{name}: a denominator has a factor with the integer {largest}, too large for the engine; "
                "simplify the coefficients"
            )
    return found
