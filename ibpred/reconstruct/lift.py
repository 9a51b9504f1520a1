"""From residues to rational numbers: Chinese remainders and rational reconstruction."""

from __future__ import annotations

from collections.abc import Sequence
from math import gcd

MARGIN_BITS = 20
"""A number is believed once the modulus exceeds numerator times denominator by this many bits."""


def chinese_remainder(residues: Sequence[int], modulus: int, new: Sequence[int], prime: int) -> list[int]:
    """Residues modulo ``modulus * prime`` from those modulo `modulus` and a prime not in it."""
    inverse = pow(modulus, -1, prime)
    return [
        old + modulus * ((fresh - old) * inverse % prime) for old, fresh in zip(residues, new, strict=True)
    ]


def rational_number(residue: int, modulus: int, margin_bits: int = MARGIN_BITS) -> tuple[int, int] | None:
    """The n/d congruent to the residue with the smallest ``|n| * d``, or None if it is not small.

    Euclid's algorithm, read off before its largest quotient (Monagan, "Maximal quotient rational
    reconstruction", ISSAC 2004): no bound has to be shared out between n and d beforehand.

    Returns
    -------
    pair or None
        (n, d), coprime, d > 0, with ``|n| * d * 2**margin_bits <= modulus``.
    """
    residue %= modulus
    if residue == 0:
        return 0, 1
    above, rest = modulus, residue
    cofactor_above, cofactor = 0, 1
    best, size = None, (modulus >> margin_bits) + 1
    while rest:
        if rest * abs(cofactor) < size:
            best, size = (rest, cofactor), rest * abs(cofactor)
        quotient = above // rest
        above, rest = rest, above - quotient * rest
        cofactor_above, cofactor = cofactor, cofactor_above - quotient * cofactor
    if best is None or gcd(*best) != 1:
        return None
    return best if best[1] > 0 else (-best[0], -best[1])


def rational_vector(
    residues: Sequence[int], modulus: int, margin_bits: int = MARGIN_BITS
) -> tuple[list[int], int] | None:
    """Integers and one common positive denominator congruent to the residues, in lowest terms.

    Most numbers of a vector share their denominator, so each is first tried as an integer after
    multiplication with the denominator found so far.

    Returns
    -------
    pair or None
        None if some number needs a larger modulus.
    """
    limit = modulus >> margin_bits
    half = modulus // 2
    common = 1
    found: list[int] = []
    for residue in residues:
        scaled = residue * common % modulus
        if scaled > half:
            scaled -= modulus
        if abs(scaled) * common <= limit:
            found.append(scaled)
            continue
        number = rational_number(scaled, modulus, margin_bits)
        if number is None:
            return None
        numerator, denominator = number
        if abs(numerator) * denominator * common > limit:
            return None
        found = [value * denominator for value in found]
        found.append(numerator)
        common *= denominator
    shared = gcd(common, *found) if found else common
    return [value // shared for value in found], common // shared
