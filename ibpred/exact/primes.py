"""Primes for modular work: just below a power of two, in a fixed order."""

from __future__ import annotations

from collections.abc import Iterator

import flint

ENGINE_BITS = 49
"""Size of the engine's primes: products of residues fit a fused multiply-add pair of doubles with
headroom for lazy sums."""


def primes_below(bits: int) -> Iterator[int]:
    """Primes below ``2**bits``, from the largest down.

    Parameters
    ----------
    bits
        At least 3.
    """
    candidate = 2**bits - 1
    while candidate > 2:
        if flint.fmpz(candidate).is_prime():
            yield candidate
        candidate -= 2


def is_prime(n: int) -> bool:
    """Whether `n` is prime (proved by FLINT)."""
    return bool(flint.fmpz(n).is_prime())


def first_primes(count: int, *, bits: int = ENGINE_BITS, skip: int = 0) -> tuple[int, ...]:
    """`count` primes below ``2**bits`` in descending order, after the first `skip`."""
    source = primes_below(bits)
    for _ in range(skip):
        next(source)
    return tuple(next(source) for _ in range(count))
