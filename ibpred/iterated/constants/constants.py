"""Exact constants: polynomials over Q in square roots, pi, logarithms, zeta values and their like.

The square roots I and sqrt3 are algebraic. The other generators are conjectured to be algebraically
independent over Q; equality here is equality of polynomials, which is equality of numbers in every case that
can be proved and, under that standard conjecture, in all.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from fractions import Fraction
from typing import Any, Union

import flint

from ibpred.balls.context import Ball, precision
from ibpred.exact.grammar import parse
from ibpred.iterated.constants.generators import (
    GENERATORS,
    NAMES,
    SQUARES,
    UNIT_MONOMIAL,
    Monomial,
    generator_ball,
    monomial_weight,
    multiply_monomials,
)

Number = Union["Constant", int, Fraction]

_CONTEXT = flint.fmpq_mpoly_ctx.get(NAMES, "lex")


class Constant:
    """A polynomial over Q in the generators, linear in square roots. Immutable and hashable.

    Mixed arithmetic with `int` and `fractions.Fraction` is allowed.
    """

    __slots__ = ("polynomial",)

    def __init__(self, polynomial: Any) -> None:
        """Wrap a `flint.fmpq_mpoly` linear in the square roots; use the named constructors otherwise."""
        self.polynomial = polynomial

    # -- constructors ---------------------------------------------------------------------------
    @staticmethod
    def rational(value: int | Fraction) -> Constant:
        """The rational number `value`."""
        return Constant(_CONTEXT.constant(_fmpq(value)))

    @staticmethod
    def generator(name: str) -> Constant:
        """The generator called `name`.

        Raises
        ------
        KeyError
            With the name and the known ones, if there is no such generator.
        """
        if name not in NAMES:
            raise KeyError(name, *NAMES)
        return Constant(_CONTEXT.gens()[NAMES.index(name)])

    @staticmethod
    def from_terms(terms: Mapping[Monomial, Fraction | Any]) -> Constant:
        """From monomials (square roots at most to the first power) and their rational coefficients."""
        return Constant(_CONTEXT.from_dict({m: _fmpq(c) for m, c in terms.items() if c}))

    @staticmethod
    def read(text: str) -> Constant:
        """Read what `str` writes, e.g. ``pi^4/90 - 7/4*zeta3``.

        Raises
        ------
        ExpressionError
            With the place, if the text is no polynomial in the generators.
        """
        return parse(text, Constant.rational, Constant.generator)

    # -- arithmetic -----------------------------------------------------------------------------
    def __add__(self, other: Number) -> Constant:
        return Constant(self.polynomial + _polynomial(other))

    __radd__ = __add__

    def __sub__(self, other: Number) -> Constant:
        return Constant(self.polynomial - _polynomial(other))

    def __rsub__(self, other: Number) -> Constant:
        return Constant(_polynomial(other) - self.polynomial)

    def __neg__(self) -> Constant:
        return Constant(-self.polynomial)

    def __mul__(self, other: Number) -> Constant:
        return Constant(_linear_in_roots(self.polynomial * _polynomial(other)))

    __rmul__ = __mul__

    def __truediv__(self, other: Number) -> Constant:
        divisor = _polynomial(other)
        if not divisor.is_constant():
            raise ZeroDivisionError("division by a transcendental constant is not defined in this ring")
        if divisor.is_zero():
            raise ZeroDivisionError("division by zero")
        return Constant(self.polynomial * (1 / divisor.leading_coefficient()))

    def __pow__(self, exponent: int) -> Constant:
        if exponent < 0:
            return Constant.rational(1) / (self**-exponent)
        result = Constant.rational(1)
        for _ in range(exponent):
            result = result * self
        return result

    def __eq__(self, other: object) -> bool:
        if isinstance(other, (Constant, int, Fraction)):
            return bool((self.polynomial - _polynomial(other)).is_zero())
        return NotImplemented

    def __hash__(self) -> int:
        return hash(str(self))

    def __bool__(self) -> bool:
        return not self.polynomial.is_zero()

    def __reduce__(self) -> tuple[Any, ...]:
        return Constant.read, (str(self),)

    # -- structure ------------------------------------------------------------------------------
    def terms(self) -> Iterator[tuple[Monomial, Fraction]]:
        """Monomials and coefficients, in the fixed (lexicographic) order."""
        for monomial, coefficient in zip(self.polynomial.monoms(), self.polynomial.coeffs(), strict=True):
            yield tuple(int(e) for e in monomial), Fraction(int(coefficient.p), int(coefficient.q))

    def weights(self) -> frozenset[int]:
        """Transcendental weights that occur; empty for zero."""
        return frozenset(monomial_weight(m) for m, _ in self.terms())

    def part(self, weight: int) -> Constant:
        """The terms of one weight."""
        return Constant.from_terms({m: c for m, c in self.terms() if monomial_weight(m) == weight})

    def real(self) -> Constant:
        """Real part."""
        return Constant.from_terms({m: c for m, c in self.terms() if m[0] == 0})

    def imaginary(self) -> Constant:
        """Imaginary part (without the factor I)."""
        return Constant.from_terms({(0, *m[1:]): c for m, c in self.terms() if m[0] == 1})

    def to_fraction(self) -> Fraction:
        """The value, where the constant is a rational number.

        Raises
        ------
        ValueError
            If it is not.
        """
        if not self.polynomial.is_constant():
            raise ValueError(f"{self} is not rational")
        return sum((c for _, c in self.terms()), Fraction(0))

    # -- output ---------------------------------------------------------------------------------
    def ball(self, bits: int) -> Ball:
        """A complex ball (`flint.acb`) that contains the value, at `bits` of working precision."""
        with precision(bits + 16):
            total = flint.acb(0)
            for monomial, coefficient in self.terms():
                term = flint.acb(flint.arb(_fmpq(coefficient)))
                for index, exponent in enumerate(monomial):
                    if exponent:
                        term = term * generator_ball(index, bits + 16) ** exponent
                total += term
            return total

    def __str__(self) -> str:
        pieces = []
        for monomial, coefficient in self.terms():
            names = [NAMES[i] if e == 1 else f"{NAMES[i]}^{e}" for i, e in enumerate(monomial) if e]
            above = list(names)
            if abs(coefficient.numerator) != 1 or not names:
                above.insert(0, str(abs(coefficient.numerator)))
            text = "*".join(above) + (f"/{coefficient.denominator}" if coefficient.denominator != 1 else "")
            pieces.append(("-" if coefficient < 0 else "+", text))
        return _signed_sum(pieces)

    def latex(self) -> str:
        """LaTeX of the value, e.g. ``\\frac{\\pi^{4}}{90}``."""
        pieces = []
        for monomial, coefficient in self.terms():
            names = [
                GENERATORS[i].latex if e == 1 else f"{GENERATORS[i].latex}^{{{e}}}"
                for i, e in enumerate(monomial)
                if e
            ]
            above = " ".join(names)
            if abs(coefficient.numerator) != 1 or not names:
                above = f"{abs(coefficient.numerator)} {above}".strip()
            below = coefficient.denominator
            text = above if below == 1 else rf"\frac{{{above}}}{{{below}}}"
            pieces.append(("-" if coefficient < 0 else "+", text))
        return _signed_sum(pieces)

    def __repr__(self) -> str:
        return f"Constant({self})"


def zeta(n: int) -> Constant:
    """zeta(n) for n >= 2: a rational multiple of pi^n for even n (Euler), a generator for odd n.

    Raises
    ------
    KeyError
        For odd n beyond the generators.
    """
    if n % 2:
        return Constant.generator(f"zeta{n}")
    bernoulli = flint.fmpq.bernoulli(n)
    value = Fraction(int(bernoulli.p), int(bernoulli.q))
    factorial = int(flint.fmpz.fac_ui(n))
    # zeta(2m) = (-1)^(m+1) B_2m (2 pi)^(2m) / (2 (2m)!)
    factor: Fraction = (-1) ** (n // 2 + 1) * value * Fraction(2**n, 2 * factorial)
    power: Constant = Constant.generator("pi") ** n
    return power * factor


def log_of(value: Fraction) -> Constant:
    """Logarithm of a positive rational number whose prime factors are among 2 and 3.

    Raises
    ------
    KeyError
        With the missing generator, for another prime factor.
    """
    total = ZERO
    for number, sign in ((value.numerator, 1), (value.denominator, -1)):
        for prime, power in flint.fmpz(number).factor():
            total = total + Constant.generator(f"log{int(prime)}") * (sign * int(power))
    return total


def sum_of(values: Iterable[Constant]) -> Constant:
    """Sum of constants."""
    total = ZERO
    for value in values:
        total = total + value
    return total


def _signed_sum(pieces: Iterable[tuple[str, str]]) -> str:
    text = ""
    for sign, piece in pieces:
        if not text:
            text = piece if sign == "+" else f"-{piece}"
        else:
            text += f" {sign} {piece}"
    return text or "0"


def _fmpq(value: int | Fraction | Any) -> Any:
    if isinstance(value, Fraction):
        return flint.fmpq(value.numerator, value.denominator)
    return flint.fmpq(value)


def _polynomial(value: Number) -> Any:
    return value.polynomial if isinstance(value, Constant) else _CONTEXT.constant(_fmpq(value))


def _linear_in_roots(polynomial: Any) -> Any:
    if polynomial.is_zero():
        return polynomial
    degrees = polynomial.degrees()
    if all(degrees[place] < 2 for place, _ in SQUARES):
        return polynomial
    terms: dict[Monomial, Any] = {}
    for monomial, coefficient in polynomial.to_dict().items():
        factor, reduced = multiply_monomials(tuple(int(e) for e in monomial), UNIT_MONOMIAL)
        terms[reduced] = terms.get(reduced, flint.fmpq(0)) + factor * coefficient
    return _CONTEXT.from_dict({m: c for m, c in terms.items() if c != 0})


ZERO = Constant.rational(0)
ONE = Constant.rational(1)
