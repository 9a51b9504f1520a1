"""Rank-1 lattices for periodic integrands, built component by component.

The generating vector minimises, one component after the other, the worst-case error in the Korobov
space of smoothness 2 with product weights; for a prime number of points the search is one cyclic
convolution (D. Nuyens, R. Cools, Math. Comp. 75 (2006) 903). Random shifts give error estimates
(I. Sloan, S. Joe, Lattice Methods for Multiple Integration, 1994).
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from ibpred.exact.primes import is_prime


def prime_at_least(n: int) -> int:
    """The least prime >= n."""
    n = max(n, 2)
    while not is_prime(n):
        n += 1
    return n


@lru_cache(maxsize=64)
def _generator(points: int, dimensions: int) -> tuple[int, ...]:
    root = _primitive_root(points)
    order = points - 1
    powers = np.ones(order, dtype=np.int64)
    for k in range(1, order):
        powers[k] = powers[k - 1] * root % points
    x = powers / points
    kernel = 2 * np.pi**2 * (x * x - x + 1.0 / 6)
    transformed = np.fft.rfft(kernel)
    product = np.ones(order)  # product over chosen components at k = powers
    chosen = []
    for j in range(dimensions):
        # error of component z = g^i: sum over k = g^m of product[m] * kernel(g^(i + m))
        error = np.fft.irfft(transformed * np.conj(np.fft.rfft(product)), order)
        i = int(np.argmin(error)) if j else 0
        chosen.append(int(powers[i]))
        weight = 1.0 / (j + 1)
        product = product * (1.0 + weight * np.roll(kernel, -i))
    return tuple(chosen)


def lattice(points: int, dimensions: int) -> NDArray[np.int64]:
    """Generating vector of a lattice with a prime number of points.

    Parameters
    ----------
    points
        A prime.

    Returns
    -------
    array
        int64 (dimensions,).
    """
    return np.array(_generator(points, dimensions), dtype=np.int64)


def _primitive_root(prime: int) -> int:
    """A generator of the multiplicative group modulo a prime."""
    order, rest, factors = prime - 1, prime - 1, set()
    divisor = 2
    while divisor * divisor <= rest:
        while rest % divisor == 0:
            factors.add(divisor)
            rest //= divisor
        divisor += 1
    if rest > 1:
        factors.add(rest)
    candidate = 1
    while any(pow(candidate, order // f, prime) == 1 for f in factors):
        candidate += 1
    return candidate
