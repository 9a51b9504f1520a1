"""``h dlog`` of letters with square roots near a centre, as power series in the local coordinate h.

It is a constant times a power of h, a polynomial, and powers ``(1 - h/d)^e``, e integer or half-integer, for
the zeros d of radicands and of denominators. Each factor has a binomial series, so the series and a bound of
all its coefficients are explicit.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from math import ceil

import flint

from ibpred.balls.context import Ball, RealBall, complex_ball, real_ball

SeriesBalls = list[Ball]
"""Coefficients of t^0, t^1, ..."""


@dataclass(frozen=True)
class Kernel:
    """``front h^power sum_k polynomial[k] h^k prod (1 - h/d)^e``.

    Attributes
    ----------
    front
        A constant.
    power
        At least 0.
    polynomial
        Coefficients, constant term first.
    factors
        (1/d, e).
    """

    front: Ball
    power: int
    polynomial: tuple[Ball, ...]
    factors: tuple[tuple[Ball, Fraction], ...]

    def is_constant(self) -> bool:
        """Whether nothing but the value at h = 0 is left."""
        return not self.power and len(self.polynomial) == 1 and not self.factors

    def constant(self) -> Ball:
        """The value at h = 0."""
        return flint.acb(0) if self.power else self.front * self.polynomial[0]

    def coefficients(self, scale: RealBall, terms: int) -> SeriesBalls:
        """Coefficients of ``t = h/scale`` without the constant one (at the current precision)."""
        total = flint.acb_poly([self.front * c * scale**k for k, c in enumerate(self.polynomial)])
        for inverse, exponent in self.factors:
            total = _truncated(total * _binomial(inverse * scale, exponent, terms), terms)
        found = [flint.acb(0)] * self.power + [c * scale**self.power for c in total.coeffs()]
        found = (found + [flint.acb(0)] * terms)[:terms]
        found[0] = flint.acb(0)
        return found

    def bound(self, radius: RealBall) -> RealBall:
        """C such that no coefficient of h^m exceeds ``C radius^-m``; the radius is below every |d|."""
        total = flint.arb(0)
        for k, c in enumerate(self.polynomial):
            total = total + c.abs_upper() * radius**k
        total = total * self.front.abs_upper() * radius**self.power
        for inverse, exponent in self.factors:
            y = (inverse.abs_upper() * radius).upper()
            whole = max(0, ceil(exponent))
            # the coefficients of (1 - y)^-a are positive for a >= 0
            total = total * (1 + y) ** whole / (1 - y) ** real_ball(whole - exponent, 64)
        return flint.arb(total.upper())


def _binomial(z: Ball, exponent: Fraction, terms: int) -> Ball:
    """``(1 - z t)^exponent``."""
    value = flint.acb(1)
    found = [value]
    for m in range(1, terms):
        step = Fraction(m - 1 - exponent, m)
        if not step:
            break
        value = value * z * step.numerator / step.denominator
        found.append(value)
    return flint.acb_poly(found)


def _truncated(polynomial: Ball, terms: int) -> Ball:
    return polynomial if len(polynomial) <= terms else flint.acb_poly(polynomial.coeffs()[:terms])


def convolved(series: SeriesBalls, kernel: SeriesBalls) -> SeriesBalls:
    """Product of two series, as many terms as the first has."""
    whole = flint.acb_poly(series) * flint.acb_poly(kernel)
    product: SeriesBalls = whole.coeffs()[: len(series)]
    return product + [flint.acb(0)] * (len(series) - len(product))


def shifted(coefficients: tuple[int, ...], centre: Ball, bits: int) -> tuple[Ball, ...]:
    """Coefficients of a polynomial about another centre (at the current precision)."""
    found = [complex_ball(c, 0, bits) for c in coefficients]
    for i in range(len(found) - 1):
        for k in reversed(range(i, len(found) - 1)):
            found[k] = found[k] + centre * found[k + 1]
    return tuple(found)
