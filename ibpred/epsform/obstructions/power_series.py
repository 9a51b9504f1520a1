"""Truncated power series with rational coefficients, and polynomials of them in log t."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from typing import Any

import flint

from ibpred.exact.rational import Rational

Series = Any  # flint.fmpq_poly, understood modulo t^length


def series(values: Sequence[int | Fraction]) -> Series:
    """From its coefficients."""
    return flint.fmpq_poly([flint.fmpq(Fraction(v).numerator, Fraction(v).denominator) for v in values])


def times(left: Series, right: Series, length: int) -> Series:
    """Product modulo t^length."""
    return left.mul_low(right, length)


def inverse(value: Series, length: int) -> Series:
    """1/value modulo t^length, by Newton's iteration; the constant term must not vanish."""
    found, known = flint.fmpq_poly([1 / value[0]]), 1
    while known < length:
        known = min(2 * known, length)
        rest = 2 - times(value.truncate(known), found, known)
        found = times(found, rest, known)
    return found


def theta(value: Series) -> Series:
    """``t d/dt``."""
    return flint.fmpq_poly([c * k for k, c in enumerate(value.coeffs())])


def integral(value: Series) -> Series:
    """The inverse of `theta` without constant term.

    Raises
    ------
    ArithmeticError
        If the integrand has a constant term, so that a logarithm would appear.
    """
    if value[0] != 0:
        raise ArithmeticError("the integral is no power series")
    return flint.fmpq_poly([0, *(c / k for k, c in enumerate(value.coeffs()) if k)])


def expansion(value: Rational, name: str, length: int) -> Series:
    """A rational function of one variable that is regular at zero."""
    place = value.ring.index(name)

    def polynomial(terms: Any) -> Series:
        table = {int(e[place]): int(c) for e, c in terms.to_dict().items()}
        return flint.fmpq_poly([table.get(k, 0) for k in range(max(table, default=0) + 1)])

    top, bottom = polynomial(value.numerator), polynomial(value.denominator)
    return times(top, inverse(bottom, length), length)
