"""How large coefficients will be, and so how many primes they need, from values at a small point."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from ibpred.reconstruct.factors import Factor, products
from ibpred.reconstruct.lift import MARGIN_BITS, chinese_remainder, rational_number
from ibpred.reconstruct.modular import multiply
from ibpred.reconstruct.sampling import Draws

_POINTS = 32  # small points tried in one batch until one is regular
_SMALLEST, _LARGEST = 2, 13  # size of their coordinates
_WATCHED = 64  # functions whose values are lifted


def primes_needed(
    draws: Draws,
    rows: NDArray[np.int64],
    factors: tuple[Factor, ...],
    powers: NDArray[np.int64],
    bounds: NDArray[np.int64],
    primes: Sequence[int],
) -> int:
    """An estimate, for a plan, of the number of primes that the numerators' coefficients need.

    The numerators' values at one point with small coordinates are lifted to Q, at one sample a prime;
    half of what the largest monomial contributes to their size is taken off.

    Parameters
    ----------
    rows
        Entries of the sampler.
    factors, powers
        An entry times ``prod factors**powers`` is its numerator.
    bounds
        (rows, variables + 1): degrees and total degree of the numerators.
    primes
        At most that many.
    """
    if len(rows) > _WATCHED:
        chosen = np.sort(draws.random.choice(len(rows), _WATCHED, replace=False))
        rows, powers, bounds = rows[chosen], powers[chosen], bounds[chosen]
    shape = (draws.variables, _POINTS)
    signs = 2 * draws.random.integers(0, 2, size=shape) - 1
    place = signs * draws.random.integers(_SMALLEST, _LARGEST + 1, size=shape)
    state, modulus = [0] * len(rows), 1
    for prime in primes:
        points = (place % prime).astype(np.uint64)
        found, usable = draws.at(points, prime, rows)
        known, regular = products(factors, powers, points, prime)
        usable &= regular
        if not usable.any():
            if modulus == 1:  # no small point is regular: any plan is a guess
                return 1
            continue
        lane = int(np.argmax(usable))
        place = place[:, lane : lane + 1]
        fresh = multiply(found[:, lane], known[:, lane], prime)
        state = chinese_remainder(state, modulus, [int(value) for value in fresh], prime)
        modulus *= prime
        numbers = [rational_number(residue, modulus) for residue in state]
        if all(number is not None for number in numbers):
            sizes = np.log2(np.abs(place[:, 0]).astype(np.float64))
            bits = max(
                number[0].bit_length() + number[1].bit_length() - _spread(bound, sizes) / 2
                for number, bound in zip(numbers, bounds, strict=True)
                if number is not None
            )
            return max(1, min(len(primes), -(-int(bits + MARGIN_BITS) // (prime.bit_length() - 1))))
    return len(primes)


def _spread(bound: NDArray[np.int64], sizes: NDArray[np.float64]) -> float:
    """Logarithm of the largest monomial within the bounds."""
    left, total = int(bound[-1]), 0.0
    for i in np.argsort(-sizes):
        power = min(left, int(bound[i]))
        total += max(power, 0) * float(sizes[i])
        left -= max(power, 0)
    return total
