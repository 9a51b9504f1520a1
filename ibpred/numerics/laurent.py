"""Laurent expansions in eps: exact ones of rational functions, and products with balls."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import factorial

import flint

from ibpred.balls.context import Ball, precision
from ibpred.errors import InputError
from ibpred.exact.rational import Polynomial, Rational, Ring, ring

EPSILON: Ring = ring(("eps",))
"""Q(eps)."""


@dataclass(frozen=True)
class Laurent:
    """``sum_k coefficients[k] eps^(lowest + k)``, exact as far as it goes.

    Attributes
    ----------
    lowest
        The valuation: the first coefficient is not zero.
    coefficients
        From there on.
    """

    lowest: int
    coefficients: tuple[Fraction, ...]


def valuation(value: Rational) -> int:
    """Order of vanishing at eps = 0 of a nonzero element of Q(eps); negative for a pole."""
    return _lowest(value.numerator) - _lowest(value.denominator)


def laurent(value: Rational, order: int) -> Laurent:
    """Expansion of a nonzero element of Q(eps) through ``eps^order``.

    Raises
    ------
    InputError
        If the element is zero or has other variables.
    """
    if value.is_zero() or value.ring is not EPSILON:
        raise InputError(f"a nonzero rational function of eps alone is expected, not {value}")
    lowest = valuation(value)
    count = max(order - lowest + 1, 1)
    above = _coefficients(value.numerator, count)
    below = _coefficients(value.denominator, count)
    found: list[Fraction] = []
    for k in range(count):
        total = above[k] - sum((below[i] * found[k - i] for i in range(1, k + 1)), Fraction(0))
        found.append(total / below[0])
    return Laurent(lowest, tuple(found))


def _lowest(polynomial: Polynomial) -> int:
    return min(int(exponents[0]) for exponents in polynomial.to_dict())


def _coefficients(polynomial: Polynomial, count: int) -> list[Fraction]:
    """The first coefficients from the lowest nonzero one on."""
    terms = {int(exponents[0]): int(c) for exponents, c in polynomial.to_dict().items()}
    lowest = min(terms)
    return [Fraction(terms.get(lowest + k, 0)) for k in range(count)]


def exponential_series(exponent: Ball, count: int, bits: int) -> list[Ball]:
    """The first coefficients of ``exp(exponent * eps)``."""
    with precision(bits):
        return [exponent**k / factorial(k) if k else flint.acb(1) for k in range(count)]


def truncated_product(left: Sequence[Ball], right: Sequence[Ball], count: int, bits: int) -> list[Ball]:
    """The first coefficients of the product of two power series; what is exactly zero stays so."""
    with precision(bits):
        found = []
        for k in range(count):
            total = flint.acb(0)
            for i in range(max(0, k - len(right) + 1), min(k + 1, len(left))):
                total = total + left[i] * right[k - i]
            found.append(total)
        return found
