"""Bare FLINT integer polynomials (`fmpz_mpoly`): terms, text, residues."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

Polynomial = Any  # flint.fmpz_mpoly; python-flint ships no usable type for it


def polynomial_text(polynomial: Polynomial) -> str:
    """Infix text of an integer polynomial, ``^`` for powers, no spaces, in the ring's term order."""
    return str(polynomial).replace(" ", "")


def plain_terms(polynomial: Polynomial) -> dict[tuple[int, ...], int]:
    """Coefficients by exponents, as Python integers."""
    return {tuple(map(int, e)): int(c) for e, c in polynomial.to_dict().items()}


def constant_value(polynomial: Polynomial) -> int:
    """The value of a polynomial that is known to be constant."""
    for coefficient in polynomial.coeffs():
        return int(coefficient)
    return 0


def residue(polynomial: Polynomial, values: Sequence[int], prime: int) -> int:
    """Value modulo a prime at integers given in the order of the variables."""
    total = 0
    for exponents, coefficient in polynomial.to_dict().items():
        term = int(coefficient) % prime
        for value, exponent in zip(values, exponents, strict=True):
            if exponent:
                term = term * pow(value, int(exponent), prime) % prime
        total += term
    return total % prime
