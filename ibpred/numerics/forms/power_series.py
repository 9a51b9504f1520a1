"""Power series in eps with balls as coefficients."""

from __future__ import annotations

from collections.abc import Sequence
from math import factorial

import flint

from ibpred.balls.context import Ball, precision
from ibpred.exact.rational import Ring, ring

EPSILON: Ring = ring(("eps",))
"""Q(eps)."""


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
