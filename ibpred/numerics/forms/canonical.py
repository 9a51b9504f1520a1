"""The canonical system ``df = eps sum_l A_l dlog(q_l(x)) f`` as the numerics read it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

import flint

from ibpred.balls.context import Ball, complex_ball, precision
from ibpred.epsform.form import EpsilonForm
from ibpred.errors import InputError, PointError
from ibpred.exact.rational import Rational

SparseRows = tuple[tuple[int, tuple[tuple[int, Fraction], ...]], ...]
"""Nonzero rows of a rational matrix: (row, ((column, value), ...))."""

Orders = tuple[tuple[Ball, ...], ...]
"""``orders[k][i]``: the coefficient of eps^k of the canonical function i."""


@dataclass(frozen=True)
class Letter:
    """One letter with its matrix.

    Attributes
    ----------
    coefficients
        Integer coefficients of the irreducible polynomial q(x), constant term first, degree >= 1.
    rows
        The matrix A of ``A dlog q``.
    """

    coefficients: tuple[int, ...]
    rows: SparseRows

    @property
    def text(self) -> str:
        return str(flint.fmpz_poly(list(self.coefficients)))

    def at(self, x: Fraction) -> Fraction:
        """The letter's value."""
        total = Fraction(0)
        for coefficient in reversed(self.coefficients):
            total = total * x + coefficient
        return total

    def root(self) -> Fraction | None:
        """The zero of a linear letter; None for one of higher degree."""
        if len(self.coefficients) != 2:
            return None
        return Fraction(-self.coefficients[0], self.coefficients[1])

    def roots(self, bits: int) -> tuple[Ball, ...]:
        """All zeros as balls."""
        exact = self.root()
        if exact is not None:
            return (complex_ball(exact, 0, bits),)
        with precision(bits + 20):
            return tuple(root for root, _ in flint.fmpz_poly(list(self.coefficients)).complex_roots())


@dataclass(frozen=True)
class CanonicalSystem:
    """``f' = eps sum_l A_l q_l'/q_l f`` in one variable, letters without a matrix left out.

    Attributes
    ----------
    size
        Number of functions.
    letters
        Letters whose matrix is not zero.
    """

    size: int
    letters: tuple[Letter, ...]


def sparse_rows(matrix: Sequence[Sequence[Fraction | int]]) -> SparseRows:
    """The nonzero rows of a dense rational matrix."""
    rows = []
    for i, row in enumerate(matrix):
        entries = tuple((j, Fraction(value)) for j, value in enumerate(row) if value != 0)
        if entries:
            rows.append((i, entries))
    return tuple(rows)


def canonical_system(form: EpsilonForm) -> CanonicalSystem:
    """The system of an epsilon-form in one ratio.

    Raises
    ------
    InputError
        If the form has more than one ratio.
    """
    if len(form.variables) != 1:
        raise InputError(
            f"numbers are computed along one ratio; this form has {len(form.variables)}: "
            f"{', '.join(form.variables)}"
        )
    letters = []
    for polynomial, matrix in zip(form.letters, form.matrices, strict=True):
        rows = sparse_rows(matrix)
        if rows:
            letters.append(Letter(_coefficients(polynomial, form.variables[0]), rows))
    return CanonicalSystem(len(form.transformation), tuple(letters))


def linear_system(
    points: Sequence[Fraction | int], matrices: Sequence[Sequence[Sequence[Fraction | int]]]
) -> CanonicalSystem:
    """The system ``f' = eps sum_l A_l/(x - a_l) f`` with rational points a_l."""
    letters = []
    for point, matrix in zip(points, matrices, strict=True):
        exact = Fraction(point)
        letters.append(Letter((-exact.numerator, exact.denominator), sparse_rows(matrix)))
    size = len(matrices[0]) if matrices else 0
    return CanonicalSystem(size, tuple(letter for letter in letters if letter.rows))


def refuse_singular(system: CanonicalSystem, x: Fraction) -> None:
    """Refuse a point where a letter vanishes.

    Raises
    ------
    PointError
        Naming the letter.
    """
    for letter in system.letters:
        if letter.at(x) == 0:
            raise PointError(
                f"the point x = {x} lies on a singularity: the letter {letter.text} vanishes there; "
                "choose another point"
            )


def _coefficients(letter: Rational, variable: str) -> tuple[int, ...]:
    place = letter.ring.index(variable)
    if letter.variables() != (variable,) or not letter.is_polynomial():
        raise InputError(f"the letter {letter} is no polynomial in {variable} alone")
    terms = {int(exponents[place]): int(c) for exponents, c in letter.numerator.to_dict().items()}
    return tuple(terms.get(k, 0) for k in range(max(terms) + 1))
