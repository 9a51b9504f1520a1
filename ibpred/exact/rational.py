"""Rings of rational functions over Q in named variables, on FLINT's integer polynomials.

A `Ring` fixes the variables and their order; a `Rational` is a reduced fraction of two integer
polynomials of that ring, the denominator's leading coefficient positive. All arithmetic is exact.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from fractions import Fraction
from functools import cache
from typing import Any, Union

import flint

from ibpred.errors import InputError
from ibpred.exact.polynomial import (
    Polynomial,
    constant_value,
    factors_text,
    irreducible_factors,
    plain_terms,
    polynomial_text,
    residue,
)

__all__ = ["Polynomial", "Rational", "Ring", "Scalar", "polynomial_text", "ring"]

Scalar = Union[int, Fraction, "flint.fmpq", "flint.fmpz"]


class Ring:
    """The field Q(x1, ..., xn) with its polynomial ring Z[x1, ..., xn].

    Parameters
    ----------
    names
        The variables, in order. Get a ring by `ring(names)`: equal names give the same object.
    """

    __slots__ = ("_context", "_index", "names")

    def __init__(self, names: tuple[str, ...]) -> None:
        self.names = names
        self._index = {name: i for i, name in enumerate(names)}
        self._context = flint.fmpz_mpoly_ctx.get(names, "degrevlex")

    def __repr__(self) -> str:
        return f"Ring({', '.join(self.names)})"

    def __reduce__(self) -> tuple[Any, ...]:
        return ring, (self.names,)

    @property
    def context(self) -> Any:
        """The FLINT context (`fmpz_mpoly_ctx`) of the numerators and denominators."""
        return self._context

    def index(self, name: str) -> int:
        """Position of a variable.

        Raises
        ------
        InputError
            If the ring has no such variable.
        """
        if name not in self._index:
            raise InputError(f"unknown symbol {name!r}; known are {', '.join(self.names) or 'none'}")
        return self._index[name]

    def polynomial(self, terms: Mapping[tuple[int, ...], int]) -> Polynomial:
        """Integer polynomial from exponent tuples and coefficients."""
        return self._context.from_dict(dict(terms))

    def constant(self, value: Scalar) -> Rational:
        """The constant `value`."""
        numerator, denominator = _ratio(value)
        return Rational(self, self._context.constant(numerator), self._context.constant(denominator))

    def variable(self, name: str) -> Rational:
        """The variable `name` as an element of the field."""
        generator = self._context.gens()[self.index(name)]
        return Rational(self, generator, self._context.constant(1))

    @property
    def zero(self) -> Rational:
        return self.constant(0)

    @property
    def one(self) -> Rational:
        return self.constant(1)

    def fraction(self, numerator: Polynomial, denominator: Polynomial) -> Rational:
        """Reduced fraction of two polynomials of this ring.

        Raises
        ------
        ZeroDivisionError
            If the denominator is zero.
        """
        return _reduced(self, numerator, denominator)


@cache
def _ring(names: tuple[str, ...]) -> Ring:
    return Ring(names)


def ring(names: Iterable[str]) -> Ring:
    """The ring in the given variables; equal names give the same object."""
    return _ring(tuple(names))


class Rational:
    """An element of Q(x1, ..., xn): a reduced fraction of integer polynomials.

    Immutable and hashable; `==` is equality in the field. Mixed arithmetic with `int`,
    `fractions.Fraction` and FLINT numbers is allowed; two rings never mix.
    """

    __slots__ = ("denominator", "numerator", "ring")

    def __init__(self, ring_: Ring, numerator: Polynomial, denominator: Polynomial) -> None:
        """Wrap a fraction that is already reduced; use `Ring.fraction` otherwise."""
        self.ring = ring_
        self.numerator = numerator
        self.denominator = denominator

    # -- predicates and conversion -------------------------------------------------------------
    def __bool__(self) -> bool:
        return not self.numerator.is_zero()

    def is_zero(self) -> bool:
        return bool(self.numerator.is_zero())

    def is_one(self) -> bool:
        return bool(self.numerator.is_one() and self.denominator.is_one())

    def is_constant(self) -> bool:
        return bool(self.numerator.is_constant() and self.denominator.is_constant())

    def is_polynomial(self) -> bool:
        """Whether the denominator is a constant."""
        return bool(self.denominator.is_constant())

    def to_fraction(self) -> Fraction:
        """The value of a constant.

        Raises
        ------
        ValueError
            If the element depends on a variable.
        """
        if not self.is_constant():
            raise ValueError(f"{self} is not a constant")
        return Fraction(int(constant_value(self.numerator)), int(constant_value(self.denominator)))

    def variables(self) -> tuple[str, ...]:
        """The variables that the element depends on, in the ring's order."""
        used: set[int] = set()
        for polynomial in (self.numerator, self.denominator):
            used.update(i for i, degree in enumerate(polynomial.degrees()) if degree > 0)
        return tuple(name for i, name in enumerate(self.ring.names) if i in used)

    # -- arithmetic ----------------------------------------------------------------------------
    def _other(self, value: Rational | Scalar) -> Rational:
        if isinstance(value, Rational):
            if value.ring is not self.ring:
                raise TypeError(f"{self.ring} and {value.ring} do not mix; convert with `to_ring`")
            return value
        return self.ring.constant(value)

    def __neg__(self) -> Rational:
        return Rational(self.ring, -self.numerator, self.denominator)

    def __add__(self, value: Rational | Scalar) -> Rational:
        other = self._other(value)
        if self.denominator == other.denominator:
            if self.denominator.is_one():
                return Rational(self.ring, self.numerator + other.numerator, self.denominator)
            return _reduced(self.ring, self.numerator + other.numerator, self.denominator)
        return _reduced(
            self.ring,
            self.numerator * other.denominator + other.numerator * self.denominator,
            self.denominator * other.denominator,
        )

    __radd__ = __add__

    def __sub__(self, value: Rational | Scalar) -> Rational:
        return self + (-self._other(value))

    def __rsub__(self, value: Rational | Scalar) -> Rational:
        return self._other(value) - self

    def __mul__(self, value: Rational | Scalar) -> Rational:
        other = self._other(value)
        numerator = self.numerator * other.numerator
        if self.denominator.is_one() and other.denominator.is_one():
            return Rational(self.ring, numerator, self.denominator)
        return _reduced(self.ring, numerator, self.denominator * other.denominator)

    __rmul__ = __mul__

    def __truediv__(self, value: Rational | Scalar) -> Rational:
        other = self._other(value)
        return _reduced(self.ring, self.numerator * other.denominator, self.denominator * other.numerator)

    def __rtruediv__(self, value: Rational | Scalar) -> Rational:
        return self._other(value) / self

    def __pow__(self, exponent: int) -> Rational:
        if exponent >= 0:
            return Rational(self.ring, self.numerator**exponent, self.denominator**exponent)
        if self.is_zero():
            raise ZeroDivisionError("zero to a negative power")
        return _reduced(self.ring, self.denominator**-exponent, self.numerator**-exponent)

    def __eq__(self, value: object) -> bool:
        if isinstance(value, Rational):
            return (
                value.ring is self.ring
                and bool(value.numerator == self.numerator)
                and bool(value.denominator == self.denominator)
            )
        if isinstance(value, (int, Fraction)):
            return self == self.ring.constant(value)
        return NotImplemented

    def __hash__(self) -> int:
        return hash((self.ring.names, str(self)))

    def __reduce__(self) -> tuple[Any, ...]:
        return _from_terms, (self.ring.names, plain_terms(self.numerator), plain_terms(self.denominator))

    # -- calculus and substitution ---------------------------------------------------------------
    def derivative(self, name: str) -> Rational:
        """Partial derivative in the variable `name`."""
        i = self.ring.index(name)
        num, den = self.numerator, self.denominator
        if den.is_constant():
            return _reduced(self.ring, num.derivative(i), den)
        return _reduced(self.ring, num.derivative(i) * den - num * den.derivative(i), den * den)

    def substitute(self, values: Mapping[str, Rational | Scalar]) -> Rational:
        """Replace variables by elements of one field; variables not named stay.

        The result lies in the field of the given elements (they must share it, and it must hold
        the variables that stay); where only numbers are given it lies in this ring.

        Raises
        ------
        ZeroDivisionError
            If the denominator vanishes there.
        """
        target = self.ring
        for value in values.values():
            if isinstance(value, Rational):
                target = value.ring
        images: list[Rational] = []
        for name in self.ring.names:
            if name in values:
                value = values[name]
                images.append(value if isinstance(value, Rational) else target.constant(value))
            elif name in target.names:
                images.append(target.variable(name))
            else:
                images.append(target.zero)
                if name in self.variables():
                    raise InputError(f"no value for {name!r} in the substitution")
        return _compose(self.numerator, images, target) / _compose(self.denominator, images, target)

    def to_ring(self, target: Ring) -> Rational:
        """The same element in a ring that holds all the variables it depends on."""
        if target is self.ring:
            return self
        missing = [name for name in self.variables() if name not in target.names]
        if missing:
            raise InputError(f"{self} depends on {', '.join(missing)}, not in {target}")
        places = [target.names.index(n) if n in target.names else -1 for n in self.ring.names]

        def moved(polynomial: Polynomial) -> Polynomial:
            terms = {}
            for exponents, coefficient in polynomial.to_dict().items():
                new = [0] * len(target.names)
                for place, exponent in zip(places, exponents, strict=True):
                    if place >= 0:
                        new[place] = int(exponent)
                terms[tuple(new)] = coefficient
            return target.context.from_dict(terms)

        # a change of variables may change the leading term, so the sign is fixed anew
        return _reduced(target, moved(self.numerator), moved(self.denominator))

    def modular(self, values: Sequence[int], prime: int) -> int:
        """Value modulo a prime at integers given in the ring's order.

        Raises
        ------
        ZeroDivisionError
            If the denominator vanishes there.
        """
        denominator = residue(self.denominator, values, prime)
        if denominator == 0:
            raise ZeroDivisionError(f"the denominator of {self} vanishes modulo {prime}")
        return residue(self.numerator, values, prime) * pow(denominator, -1, prime) % prime

    # -- factors and text ------------------------------------------------------------------------
    def factors(self) -> tuple[Fraction, tuple[tuple[Polynomial, int], ...]]:
        """Content and irreducible primitive factors with their (signed) multiplicities.

        The factors come in a canonical order (by degree, number of terms, text).
        """
        if self.is_zero():
            return Fraction(0), ()
        top, above = irreducible_factors(self.numerator)
        bottom, below = irreducible_factors(self.denominator)
        found = above + [(f, -m) for f, m in below]
        found.sort(key=lambda item: (item[1] < 0, item[0].total_degree(), len(item[0]), str(item[0])))
        return Fraction(top, bottom), tuple(found)

    def __str__(self) -> str:
        num = polynomial_text(self.numerator)
        if self.denominator.is_one():
            return num
        den = polynomial_text(self.denominator)
        if len(self.numerator) > 1:
            num = f"({num})"
        if len(self.denominator) > 1 or "*" in den or "^" in den:
            den = f"({den})"
        return f"{num}/{den}"

    def factored_text(self) -> str:
        """The element as a product of its irreducible factors, e.g. ``-2*(d-3)/(t*(s+t)^2)``."""
        return factors_text(*self.factors())

    def __repr__(self) -> str:
        return f"Rational({self})"


def _from_terms(
    names: tuple[str, ...], above: dict[tuple[int, ...], int], below: dict[tuple[int, ...], int]
) -> Rational:
    ring_ = ring(names)
    return Rational(ring_, ring_.polynomial(above), ring_.polynomial(below))


def _ratio(value: Scalar) -> tuple[int, int]:
    if isinstance(value, int):
        return value, 1
    if isinstance(value, Fraction):
        return value.numerator, value.denominator
    if isinstance(value, flint.fmpq):
        return int(value.p), int(value.q)
    return int(value), 1


def _reduced(ring_: Ring, numerator: Polynomial, denominator: Polynomial) -> Rational:
    if denominator.is_zero():
        raise ZeroDivisionError("division by zero in a field of rational functions")
    if numerator.is_zero():
        return Rational(ring_, numerator, ring_.context.constant(1))
    common = numerator.gcd(denominator)
    if not common.is_one():
        numerator = numerator / common
        denominator = denominator / common
    if denominator.leading_coefficient() < 0:
        numerator, denominator = -numerator, -denominator
    return Rational(ring_, numerator, denominator)


def _compose(polynomial: Polynomial, images: Sequence[Rational], target: Ring) -> Rational:
    total = target.zero
    powers: dict[tuple[int, int], Rational] = {}
    for exponents, coefficient in polynomial.to_dict().items():
        term = target.constant(coefficient)
        for i, exponent in enumerate(exponents):
            e = int(exponent)
            if e:
                if (i, e) not in powers:
                    powers[i, e] = images[i] ** e
                term = term * powers[i, e]
        total = total + term
    return total
