"""Bare FLINT integer polynomials (`fmpz_mpoly`): terms, text, residues."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from typing import Any

import flint

from ibpred.errors import UnfinishedError

Polynomial = Any  # flint.fmpz_mpoly; python-flint ships no usable type for it


def polynomial_text(polynomial: Polynomial) -> str:
    """Infix text of an integer polynomial, ``^`` for powers, no spaces, in the ring's term order."""
    return str(polynomial).replace(" ", "")


def factors_text(content: Fraction, factors: Sequence[tuple[Polynomial, int]]) -> str:
    """Text of a content times factors with (signed) multiplicities, e.g. ``-2*(d-3)/(t*(s+t)^2)``."""
    if not factors:
        return str(content)

    def product(sign: int) -> list[str]:
        texts = []
        for polynomial, power in factors:
            if power * sign <= 0:
                continue
            text = polynomial_text(polynomial)
            if len(polynomial) > 1:
                text = f"({text})"
            texts.append(text if abs(power) == 1 else f"{text}^{abs(power)}")
        return texts

    above, below = product(1), product(-1)
    if content.denominator != 1:
        below.insert(0, str(content.denominator))
    sign = "-" if content < 0 else ""
    if abs(content.numerator) != 1 or not above:
        above.insert(0, str(abs(content.numerator)))
    text = sign + "*".join(above)
    if below:
        text += f"/{below[0]}" if len(below) == 1 else f"/({'*'.join(below)})"
    return text


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


def irreducible_factors(polynomial: Polynomial) -> tuple[int, list[tuple[Polynomial, int]]]:
    """Content and irreducible factors over the integers with their multiplicities.

    Raises
    ------
    UnfinishedError
        If factors in several variables have coefficients that FLINT's Python interface cannot sort.
    """
    try:
        content, found = polynomial.factor()
    except OverflowError:
        # sorting the factors compares coefficients as machine integers; one variable has another way
        context = polynomial.context()
        used = [k for k, degree in enumerate(polynomial.degrees()) if degree]
        if len(used) != 1:
            raise UnfinishedError(
                "a polynomial has factors with coefficients too large to be sorted"
            ) from None
        (place,) = used
        terms = {int(e[place]): int(c) for e, c in polynomial.to_dict().items()}
        content, plain = flint.fmpz_poly([terms.get(k, 0) for k in range(max(terms) + 1)]).factor()
        width = len(polynomial.degrees())
        found = []
        for factor, power in plain:
            moved = {
                tuple(k if i == place else 0 for i in range(width)): int(c)
                for k, c in enumerate(factor.coeffs())
                if c
            }
            found.append((context.from_dict(moved), power))
    return int(content), [(factor, int(power)) for factor, power in found]
