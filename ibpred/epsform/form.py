"""Records of the epsilon-factorisation: what goes in, what comes out."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

from ibpred.exact.rational import Rational, Ring

Matrix = tuple[tuple[Rational, ...], ...]


@dataclass(frozen=True)
class Connection:
    """``d I / d x = A_x(eps, x) I`` in dimensionless ratios.

    Attributes
    ----------
    variables
        The ratios, e.g. ``("x",)``.
    ring
        Q(eps, ratios): ``ring(("eps", *variables))``.
    matrices
        For each ratio a dense n x n matrix over `ring`, block lower triangular.
    blocks
        Size of each diagonal block, in order; a block holds the masters of one sector.
    labels
        A name for each row (the master), for messages.
    """

    variables: tuple[str, ...]
    ring: Ring
    matrices: Mapping[str, Matrix]
    blocks: tuple[int, ...]
    labels: tuple[str, ...]


Numbers = tuple[Fraction, ...]
"""Coefficients of a truncated power series."""


@dataclass(frozen=True)
class PeriodForm:
    """``theta M = eps B M`` with ``M = sum_p eps^p U_p diag(eps^-k) E`` (see `period_form`).

    Attributes
    ----------
    row
        ``psi = sum_i row[i] I_i``, functions of eps and x.
    point
        The point of maximal unipotent monodromy as text.
    coordinate
        t in terms of x, as text.
    exponent
        ``psi_0 = t^exponent (1 + ...)`` at eps = 0.
    period
        Taylor coefficients of ``t^-exponent psi_0``.
    kernels
        Those of a_1, ..., a_(n-1).
    gauge
        (p, rows): those of the entries of U_p.
    matrix
        Those of the entries of B.
    closed
        (row, column, text): entries of B recognised as rational functions times a power of psi_0.
    """

    row: tuple[Rational, ...]
    point: str
    coordinate: str
    exponent: Fraction
    period: Numbers
    kernels: tuple[Numbers, ...]
    gauge: tuple[tuple[int, tuple[tuple[Numbers, ...], ...]], ...]
    matrix: tuple[tuple[Numbers, ...], ...]
    closed: tuple[tuple[int, int, str], ...]


@dataclass(frozen=True)
class Obstruction:
    """Why a block has no epsilon-form over the functions tried.

    Attributes
    ----------
    rows
        The rows of the block.
    reason
        A whole sentence: what fails and at which point.
    operator
        Picard-Fuchs operator at eps = 0 as text in the variable and ``D`` = d/dx, where found.
    exponents
        (singular point, local exponents of the block) as text.
    factors
        Factors of the operator, the leftmost first, as far as they are found; in several ratios on the line
        that `geometry` names.
    operator_exponents
        (singular point, local exponents of the operator) as text, on the same line.
    geometry
        What the operator points to, a sentence.
    period_form
        The epsilon-form of the block with periods as functions, where there is one.
    """

    rows: tuple[int, ...]
    reason: str
    operator: str | None
    exponents: tuple[tuple[str, tuple[str, ...]], ...]
    factors: tuple[str, ...] = ()
    operator_exponents: tuple[tuple[str, tuple[str, ...]], ...] = ()
    geometry: str | None = None
    period_form: PeriodForm | None = None


@dataclass(frozen=True)
class OddLetter:
    """The letter ``(P - sqrt(Q)) / (P + sqrt(Q))``, which turns into its inverse with the sign of the root.

    Attributes
    ----------
    polynomial
        P, a polynomial in the ratios, or one over a product of letters.
    roots
        Q is the product of these radicands (indices) of the epsilon-form.
    """

    polynomial: Rational
    roots: tuple[int, ...]


@dataclass(frozen=True)
class EpsilonForm:
    """``I = T D f`` with ``d f = eps (sum_l A_l dlog(letter_l) + sum_m A'_m dlog(odd letter_m)) f``.

    D is the unit matrix where no square roots occur, else diagonal with the entries ``1/sqrt(tag)``.

    Attributes
    ----------
    variables, ring
        As in the connection.
    letters
        Polynomials in the ratios with coprime integer coefficients, e.g. ``x`` and ``x + 1``.
    matrices
        One constant n x n matrix of rationals for each letter, same order.
    transformation, inverse
        T and its inverse over `ring`; I is the vector of masters.
    tags
        For each canonical function the radicands (indices) whose product's square root multiplies it, so
        that ``f_i = sqrt(tag) (T^-1 I)_i``; empty tuples where no square root occurs.
    radicands
        Irreducible polynomials with coprime integer coefficients, positive where all ratios are small and
        each is much smaller than the next one, unless letters with real coefficients need the other sign.
    odd_letters, odd_matrices
        The letters with square roots, and a matrix of rationals for each. A matrix of an odd letter
        connects functions whose tags differ by just the roots of the letter.
    """

    variables: tuple[str, ...]
    ring: Ring
    letters: tuple[Rational, ...]
    matrices: tuple[tuple[tuple[Fraction, ...], ...], ...]
    transformation: Matrix
    inverse: Matrix
    tags: tuple[tuple[int, ...], ...]
    radicands: tuple[Rational, ...] = ()
    odd_letters: tuple[OddLetter, ...] = ()
    odd_matrices: tuple[tuple[tuple[Fraction, ...], ...], ...] = ()


@dataclass(frozen=True)
class Obstructed:
    """The outcome where some block has no epsilon-form: what is in the way and what was reached.

    Attributes
    ----------
    obstructions
        One for each block in the way; for blocks that merely depend on such a block there is none.
    rows
        The rows that do not depend on an obstructed block: a closed subsystem.
    solved
        The epsilon-form of that subsystem, its functions in the order of `rows`; None where there
        is no such row, or where the subsystem as a whole is obstructed too.
    complete
        False where the time was over before all blocks were looked at.
    """

    obstructions: tuple[Obstruction, ...]
    rows: tuple[int, ...]
    solved: EpsilonForm | None
    complete: bool = True
