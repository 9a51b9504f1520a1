"""Univariate rational functions modulo a prime from their values, by Euclid's algorithm."""

from __future__ import annotations

from typing import Any

import flint
import numpy as np

from ibpred.reconstruct.modular import Residues, interpolate

ModularPolynomial = Any  # flint.nmod_poly; python-flint ships no usable type for it
Fraction_ = tuple[ModularPolynomial, ModularPolynomial]

SURPLUS = 2
"""Samples beyond the unknowns that must fit before a univariate function is believed."""


def polynomial(coefficients: Residues | list[int], prime: int) -> ModularPolynomial:
    """Polynomial over F_p from coefficients by ascending degree."""
    return flint.nmod_poly([int(c) for c in coefficients], prime)


def vanishing_polynomial(nodes: Residues, prime: int) -> ModularPolynomial:
    """The monic polynomial with simple zeros at the nodes."""
    factors = [polynomial([prime - int(node), 1], prime) for node in nodes]
    while len(factors) > 1:
        pairs = [a * b for a, b in zip(factors[::2], factors[1::2], strict=False)]
        factors = pairs + (factors[-1:] if len(factors) % 2 else [])
    return factors[0] if factors else polynomial([1], prime)


def rational_function(
    modulus: ModularPolynomial, image: ModularPolynomial, surplus: int = SURPLUS
) -> Fraction_ | None:
    """The fraction N/D congruent to `image` modulo `modulus` that is simpler than generic.

    Euclid's algorithm on (modulus, image) passes through all candidates with
    deg N + deg D < deg modulus; the right one is marked by a large quotient after it (Khodadad,
    Monagan, "Fast rational function reconstruction", ISSAC 2006).

    Parameters
    ----------
    modulus
        Product of ``z - node`` (interpolation) or a power of z (Padé approximation).
    image
        Polynomial of lower degree.
    surplus
        Number of conditions that the fraction must satisfy beyond its unknowns.

    Returns
    -------
    pair or None
        (N, D), coprime, D monic; None if no fraction leaves the surplus.
    """
    prime = int(modulus.modulus())
    one, zero = polynomial([1], prime), polynomial([], prime)
    if image.is_zero():
        return (zero, one) if modulus.degree() > surplus else None
    above, rest = modulus, image
    cofactor_above, cofactor = zero, one
    while not rest.is_zero():
        if above.degree() - rest.degree() > surplus:
            lead = cofactor.leading_coefficient()
            numerator, denominator = rest / lead, cofactor / lead
            if not numerator.gcd(denominator).is_one():
                return None
            return numerator, denominator
        quotient, remainder = divmod(above, rest)
        above, rest = rest, remainder
        cofactor_above, cofactor = cofactor, cofactor_above - quotient * cofactor
    return None


def rational_functions(
    nodes: Residues, values: Residues, prime: int, surplus: int = SURPLUS
) -> list[Fraction_ | None]:
    """`rational_function` for every row of values (rows, K) at the nodes (K,)."""
    modulus = vanishing_polynomial(nodes, prime)
    images = interpolate(nodes, values, prime)
    return [rational_function(modulus, polynomial(row.tolist(), prime), surplus) for row in images]


def strip(
    poly: ModularPolynomial, factor: ModularPolynomial, highest: int | None = None
) -> tuple[ModularPolynomial, int]:
    """Divide out a non-constant factor as often as it goes; the rest and the multiplicity."""
    count = 0
    while poly.degree() >= factor.degree() and (highest is None or count < highest):
        quotient, remainder = divmod(poly, factor)
        if not remainder.is_zero():
            break
        poly = quotient
        count += 1
    return poly, count


def values_of(poly: ModularPolynomial, nodes: Residues) -> Residues:
    """Values of a polynomial at nodes."""
    return np.array([int(poly(int(node))) for node in nodes], dtype=np.uint64)
