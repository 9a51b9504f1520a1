"""Laurent series of Gamma functions, in floating point."""

from __future__ import annotations

from dataclasses import dataclass
from math import factorial

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True)
class Series:
    """``sum_k coefficients[k] * eps^(lowest + k)``, truncated."""

    lowest: int
    coefficients: NDArray[np.float64]

    def times(self, other: Series) -> Series:
        """Product, truncated to the shorter relative length."""
        count = min(len(self.coefficients), len(other.coefficients))
        product = np.convolve(self.coefficients[:count], other.coefficients[:count])[:count]
        return Series(self.lowest + other.lowest, product)


def exponential(rates: NDArray[np.float64], count: int) -> Series:
    """``exp(sum_k rates[k] eps^k)``."""
    coefficients = np.zeros(count)
    coefficients[0] = np.exp(rates[0])
    for k in range(1, count):
        coefficients[k] = sum(j * rates[j] * coefficients[k - j] for j in range(1, k + 1)) / k
    return Series(0, coefficients)


def gamma_series(constant: float, slope: float, count: int) -> Series:
    """``Gamma(constant + slope * eps)`` through `count` coefficients.

    A constant that is zero or a negative integer gives a simple pole; then the slope is not zero.
    """
    from scipy.special import gammaln, polygamma

    whole = round(constant)
    below = 0
    if abs(constant - whole) < 1e-9 and whole <= 0:
        below = 1 - whole
    elif constant < 0:
        below = int(-np.floor(constant))
    start = constant + below
    rates = np.zeros(count)
    rates[0] = gammaln(start)
    for k in range(1, count):
        rates[k] = float(polygamma(k - 1, start)) * slope**k / factorial(k)
    result = exponential(rates, count)
    for m in range(below):  # Gamma(z) = Gamma(z + 1) / z
        a = constant + m
        if abs(a) < 1e-9:
            result = Series(result.lowest - 1, result.coefficients / slope)
            continue
        quotient = np.zeros(count)
        for k in range(count):
            quotient[k] = (result.coefficients[k] - (slope * quotient[k - 1] if k else 0.0)) / a
        result = Series(result.lowest, quotient)
    return result
