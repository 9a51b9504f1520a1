"""Exponents from the characteristic polynomial of a residue at numeric eps modulo a prime."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from fractions import Fraction
from itertools import combinations
from math import prod

import flint

from ibpred.epsform.blocks import Exponent, linear
from ibpred.epsform.lattices.intertwine import modular_number
from ibpred.epsform.lattices.pencil import ModularPolynomial

LARGEST_INTEGER = 120
"""Integer shifts a are recognised up to this size (steps at finite points push integers to infinity)."""
LARGEST_FRACTION = 20
"""Fractional shifts a are recognised up to this size."""
LARGEST_SLOPE = 1000
"""Numerator and denominator of a slope b are recognised up to this size."""
LARGEST_COEFFICIENT = 100_000
"""The same for the coefficients of the polynomial of conjugate slopes."""
ROOT_ORDERS = (1, 2, 3, 4, 5, 6)
"""Denominators of a that are recognised."""

Slopes = frozenset[tuple[Fraction, ...]]
"""Polynomials of slopes, as in `Exponent`."""


@dataclass(frozen=True)
class Eigenvalue:
    """An exponent as an eigenvalue modulo the prime.

    Attributes
    ----------
    factor
        The monic polynomial over F_p whose roots are the values ``a + b eps``.
    """

    exponent: Exponent
    factor: ModularPolynomial
    multiplicity: int


def small_fraction(residue: int, prime: int, bound: int) -> Fraction | None:
    """The fraction with numerator and denominator up to a bound, if there is one."""
    above, rest, cofactor_above, cofactor = prime, residue % prime, 0, 1
    while rest > bound:
        quotient = above // rest
        above, rest = rest, above - quotient * rest
        cofactor_above, cofactor = cofactor, cofactor_above - quotient * cofactor
    if abs(cofactor) > bound:
        return None
    return Fraction(rest, cofactor)


def shifts() -> Iterator[Fraction]:
    """Candidates for a: integers first, then by denominator, small ones first."""
    for root in ROOT_ORDERS:
        largest = LARGEST_INTEGER if root == 1 else LARGEST_FRACTION
        for size in range(largest * root + 1):
            if Fraction(size, root).denominator == root:
                yield Fraction(size, root)
                if size:
                    yield Fraction(-size, root)


def spectrum(polynomial: ModularPolynomial, eps: int, slopes: Slopes | None) -> tuple[Eigenvalue, ...] | None:
    """Read the roots of a characteristic polynomial as ``a + b eps``.

    Parameters
    ----------
    polynomial
        Monic, over F_p.
    eps
        The numeric eps.
    slopes
        None where eps is random: then the only simple reading is the right one. At a given simple number
        many readings are possible, so the slopes must be known from another eps.

    Returns
    -------
    eigenvalues
        None if some root cannot be read.
    """
    prime = int(polynomial.modulus())
    found: list[Eigenvalue] = []
    open_factors: list[tuple[ModularPolynomial, int]] = []
    for factor, multiplicity in polynomial.factor()[1]:
        exponent = None
        if factor.degree() == 1:
            exponent = _single(-int(factor[0]) % prime, eps, prime, slopes)
        if exponent is None:
            open_factors.append((factor, int(multiplicity)))
        else:
            found.append(Eigenvalue(exponent, factor, int(multiplicity)))
    # conjugate slopes: sets of factors whose product, in terms of b, has rational coefficients
    while open_factors:
        group = _conjugate(open_factors, eps, prime, slopes)
        if group is None:
            return None
        found.append(group)
        open_factors = [(f, m) for f, m in open_factors if not divmod(group.factor, f)[1].is_zero()]
    return tuple(found)


def _single(value: int, eps: int, prime: int, slopes: Slopes | None) -> Exponent | None:
    if slopes is not None:
        for polynomial in slopes:
            if len(polynomial) == 2:
                rest = small_fraction(
                    value + modular_number(polynomial[0], prime) * eps, prime, 6 * LARGEST_INTEGER
                )
                if rest is not None and abs(rest) <= LARGEST_INTEGER and rest.denominator in ROOT_ORDERS:
                    return linear(rest, -polynomial[0])
        return None
    inverse = pow(eps, -1, prime)
    for a in shifts():
        b = small_fraction((value - modular_number(a, prime)) * inverse, prime, LARGEST_SLOPE)
        if b is not None:
            return linear(a, b)
    return None


def _conjugate(
    factors: list[tuple[ModularPolynomial, int]], eps: int, prime: int, slopes: Slopes | None
) -> Eigenvalue | None:
    """The smallest set of factors with one multiplicity that belongs to conjugate slopes."""
    for size in range(1, len(factors) + 1):
        for chosen in combinations(factors, size):
            if len({m for _, m in chosen}) > 1:
                continue
            product = prod(f for f, _ in chosen)
            exponent = _shared(product, eps, prime, slopes)
            if exponent is not None:
                return Eigenvalue(exponent, product, chosen[0][1])
    return None


def _shared(product: ModularPolynomial, eps: int, prime: int, slopes: Slopes | None) -> Exponent | None:
    """The exponent whose conjugates are the roots of a polynomial, if it is one."""
    degree = product.degree()
    # the sum of the roots tells a, since the sum of the slopes is rational
    trace = -int(product[degree - 1]) % prime
    known = (
        None if slopes is None else frozenset((s[-2], Fraction(1)) for s in slopes if len(s) == degree + 1)
    )
    total = _single(trace, eps, prime, known)
    if total is None:
        return None
    a = total.shift / degree
    image = product(flint.nmod_poly([modular_number(a, prime), eps], prime))
    scale = pow(eps, -degree, prime)
    coefficients = []
    for c in image.coeffs():
        number = small_fraction(int(c) * scale, prime, LARGEST_COEFFICIENT)
        if number is None:
            return None
        coefficients.append(number)
    if slopes is not None and tuple(coefficients) not in slopes:
        return None
    return Exponent(a, tuple(coefficients))
