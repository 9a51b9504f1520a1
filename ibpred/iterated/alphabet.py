"""Alphabets, even and odd letters alike, and what is left of them where ratios vanish.

An odd letter is ``(P - r)/(P + r)`` with ``r^2 = Q`` a polynomial; r is the root that is positive at the
corner ``x1 << x2 << ... -> 0+``, or i times a positive number where Q is negative there. Where a ratio
vanishes, P and r have leading powers of it. If these differ, the letter tends to +1 or -1; if the
leading coefficients agree up to sign, it is a power of the ratio times an even function; else they
make an odd letter again. In each case dlog of the letter is dlog of this limit plus a multiple of dlog of the
ratio (plus what vanishes, perhaps as the ratio's root).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from itertools import permutations
from math import isqrt
from typing import Any

import flint

from ibpred.epsform.form import EpsilonForm
from ibpred.exact.rational import Rational
from ibpred.iterated.constants.matrices import rational_matrix


@dataclass(frozen=True)
class RootLetter:
    """The letter ``(P - r)/(P + r)``.

    Attributes
    ----------
    polynomial
        P.
    square
        ``r^2``, no square of a rational function.
    roots, factor
        ``factor * r`` is the product of the roots of these radicands of the epsilon-form (of their leading
        coefficients, where ratios have gone to zero); the factor is positive at the corner.
    """

    polynomial: Rational
    square: Rational
    roots: tuple[int, ...] = field(compare=False)
    factor: Rational = field(compare=False)

    def variables(self) -> frozenset[str]:
        """The ratios on which it depends."""
        return frozenset((*self.polynomial.variables(), *self.square.variables()))

    def norm(self) -> Rational:
        """``P^2 - r^2``: the letter is zero or infinite only where this vanishes."""
        return self.polynomial * self.polynomial - self.square

    def kernel(self, name: str) -> Rational:
        """``dlog`` of the letter in one ratio, divided by r: a rational function."""
        top = self.square * self.polynomial.derivative(name) * 2 - self.polynomial * self.square.derivative(
            name
        )
        return top / (self.square * self.norm())

    def __str__(self) -> str:
        root = f"sqrt({self.square})"
        return f"({self.polynomial}-{root})/({self.polynomial}+{root})"


Letter = Rational | RootLetter


@dataclass(frozen=True)
class Alphabet:
    """Letters with the matrix (`flint.fmpq_mat`) of each.

    Attributes
    ----------
    even
        Irreducible polynomials, each up to a constant factor.
    odd
        Letters with a root.
    """

    even: Mapping[Rational, Any]
    odd: Mapping[RootLetter, Any]

    def depending_on(self, name: str) -> dict[Letter, Any]:
        """The letters that change with a ratio."""
        found: dict[Letter, Any] = {u: m for u, m in self.even.items() if name in u.variables()}
        return found | {u: m for u, m in self.odd.items() if name in u.variables()}

    def substituted(self, values: Mapping[str, Rational], order: Sequence[str]) -> Alphabet:
        """The ratios replaced by products of positive quantities, which vanish in the order given."""
        collected = _Collected()
        for letter, matrix in self.even.items():
            collected.add_even(letter.substitute(values), matrix)
        for odd, matrix in self.odd.items():
            collected.add_odd(
                odd.polynomial.substitute(values),
                odd.square.substitute(values),
                odd.roots,
                odd.factor.substitute(values),
                matrix,
                order,
            )
        return collected.alphabet()


def alphabet_of(form: EpsilonForm, corner: Sequence[str]) -> Alphabet:
    """The alphabet of a form at a corner, the smallest ratio first."""
    collected = _Collected()
    for letter, rows in zip(form.letters, form.matrices, strict=True):
        collected.add_even(letter, rational_matrix(rows))
    for odd, rows in zip(letters_with_roots(form), form.odd_matrices, strict=True):
        collected.add_odd(odd.polynomial, odd.square, odd.roots, odd.factor, rational_matrix(rows), corner)
    return collected.alphabet()


def letters_with_roots(form: EpsilonForm) -> tuple[RootLetter, ...]:
    """The odd letters of a form."""
    found = []
    for odd in form.odd_letters:
        square = form.ring.one
        for index in odd.roots:
            square = square * form.radicands[index]
        found.append(RootLetter(odd.polynomial, square, odd.roots, form.ring.one))
    return tuple(found)


def usual_corner(form: EpsilonForm) -> tuple[str, ...]:
    """The corner at which a form is solved, the smallest ratio first.

    The last ratio is the smallest, the one before it the next, unless a root is not real there: then the
    first order in which all roots are real, if there is one.
    """
    usual = tuple(reversed(form.variables))
    for corner in permutations(usual):
        if all(is_positive_at(radicand, corner) for radicand in form.radicands):
            return corner
    return usual


def limit(alphabet: Alphabet, name: str, order: Sequence[str]) -> tuple[Any, Alphabet]:
    """What an alphabet tends to where a ratio vanishes.

    Parameters
    ----------
    alphabet
        The alphabet.
    name
        The ratio that vanishes.
    order
        The ratios that are left, in the order in which they vanish at the corner.

    Returns
    -------
    tuple
        The residue (None where there is none) and the alphabet in the ratios that are left.
    """
    collected = _Collected()
    residue = None
    for letter, matrix in alphabet.even.items():
        power, rest = lowest(letter, name)
        if power:
            residue = _plus(residue, matrix * power)
        collected.add_even(rest, matrix)
    for odd, matrix in alphabet.odd.items():
        power, first = lowest(odd.polynomial, name)
        double, second = lowest(odd.square, name)
        if 2 * power != double:
            continue
        if first * first != second:
            factor = lowest(odd.factor, name)[1]
            collected.add_odd(first, second, odd.roots, factor, matrix, order)
            continue
        # (P - r)/(P + r) = (P^2 - r^2)/(P + r)^2, or its inverse where P and r differ in sign
        signed = matrix if is_positive_at(first, order) else -matrix
        height, top = lowest(odd.norm(), name)
        if height != double:
            residue = _plus(residue, signed * (height - double))
        collected.add_even(top / second, signed)
    return residue, collected.alphabet()


def lowest(value: Rational, name: str) -> tuple[int, Rational]:
    """Lowest power of a ratio in a nonzero function, and its coefficient."""
    if name not in value.variables():
        return 0, value
    place = value.ring.index(name)
    above, below = (min(int(e[place]) for e in p.monoms()) for p in (value.numerator, value.denominator))
    power = above - below
    return power, (value / value.ring.variable(name) ** power).substitute({name: 0})


def is_positive_at(value: Rational, order: Sequence[str]) -> bool:
    """Whether a nonzero function is positive where its variables vanish, each much before the next."""
    for name in order:
        value = lowest(value, name)[1]
    return value.to_fraction() > 0


def exact_root(value: Rational) -> Rational | None:
    """A square root of a rational function; None where it has none."""
    content, factors = value.factors()
    number = fraction_root(content)
    if number is None or any(power % 2 for _, power in factors):
        return None
    root = value.ring.constant(number)
    for polynomial, power in factors:
        root = root * value.ring.fraction(polynomial, value.ring.context.constant(1)) ** (power // 2)
    return root


def fraction_root(value: Fraction) -> Fraction | None:
    """The square root of a rational number that is a square; else None."""
    if value < 0:
        return None
    above, below = isqrt(value.numerator), isqrt(value.denominator)
    return Fraction(above, below) if above**2 == value.numerator and below**2 == value.denominator else None


def _common_factor(polynomial: Rational, square: Rational) -> Rational:
    """The largest polynomial g, up to sign, such that g divides P and its square divides Q."""
    content, factors = polynomial.factors()
    whole, others = square.factors()
    common = polynomial.ring.one
    for prime, power in flint.fmpz(abs(content.numerator)).factor():
        while power and whole.numerator % int(prime) ** 2 == 0:
            common, whole, power = common * int(prime), whole / int(prime) ** 2, power - 1
    one = polynomial.ring.context.constant(1)
    multiplicities = {str(irreducible): power for irreducible, power in others}
    for irreducible, power in factors:
        most = min(power, multiplicities.get(str(irreducible), 0) // 2)
        common = common * polynomial.ring.fraction(irreducible, one) ** most
    return common


def _plus(total: Any, matrix: Any) -> Any:
    return matrix if total is None else total + matrix


class _Collected:
    """Letters gathered one by one, equal ones together."""

    def __init__(self) -> None:
        self.even: dict[Rational, Any] = {}
        self.odd: dict[RootLetter, Any] = {}

    def add_even(self, function: Rational, matrix: Any) -> None:
        """dlog of a rational function: one letter for each irreducible factor."""
        for polynomial, power in function.factors()[1]:
            letter = function.ring.fraction(polynomial, function.ring.context.constant(1))
            # letters up to a constant factor: x - y and y - x are the same
            if -letter in self.even or (letter not in self.even and -letter == function):
                letter = -letter
            self.even[letter] = _plus(self.even.get(letter), matrix * int(power))

    def add_odd(
        self,
        polynomial: Rational,
        square: Rational,
        roots: tuple[int, ...],
        factor: Rational,
        matrix: Any,
        order: Sequence[str],
    ) -> None:
        """dlog of ``(P - r)/(P + r)``, r positive at the corner; a rational function where r is one."""
        if not polynomial:
            return
        root = exact_root(square)
        if root is None:
            common = _common_factor(polynomial, square)
            common = common if is_positive_at(common, order) else -common
            letter = RootLetter(polynomial / common, square / common**2, roots, factor * common)
            self.odd[letter] = _plus(self.odd.get(letter), matrix)
            return
        root = root if is_positive_at(root, order) else -root
        if polynomial not in (root, -root):
            self.add_even((polynomial - root) / (polynomial + root), matrix)

    def alphabet(self) -> Alphabet:
        even = {letter: matrix for letter, matrix in self.even.items() if matrix}
        return Alphabet(even, {letter: matrix for letter, matrix in self.odd.items() if matrix})


def zero_matrix(size: int) -> Any:
    """The zero `flint.fmpq_mat`."""
    return flint.fmpq_mat(size, size)
