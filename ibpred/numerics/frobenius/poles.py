"""Partial fractions of a system, each pole as a low-rank product.

``A(x) = sum_q sum_k C_qk(x) F_q / q(x)^k + sum_j P_j x^j`` over irreducible polynomials q of degree e over Q;
``C_qk`` has degree < e in x. F_q spans the row space of everything with q, so a pole of rank r needs r
running sums only.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import flint
import numpy as np

from ibpred.numerics.frobenius.spectrum import ExactMatrix
from ibpred.numerics.frobenius.system import RationalSystem, Univariate
from ibpred.numerics.frobenius.weights import Floats, perron_weights


@dataclass(frozen=True)
class Pole:
    """The part of A with one irreducible denominator.

    Attributes
    ----------
    factor
        q, monic over Q.
    rows
        F_q, r x n.
    columns
        ``columns[k - 1][j]`` is the coefficient of x^j in C_qk, n x r.
    """

    factor: Univariate
    rows: ExactMatrix
    columns: tuple[tuple[ExactMatrix, ...], ...]

    @property
    def order(self) -> int:
        return len(self.columns)

    def position(self) -> Fraction | None:
        """The pole where it is rational."""
        if self.factor.degree() != 1:
            return None
        value = -flint.fmpq(self.factor[0])
        return Fraction(int(value.p), int(value.q))


@dataclass(frozen=True)
class PartialFractions:
    """A system in partial fractions.

    Attributes
    ----------
    size
        Number of functions.
    poles
        In a canonical order.
    polynomial
        ``P_0, P_1, ...``.
    """

    size: int
    poles: tuple[Pole, ...]
    polynomial: tuple[ExactMatrix, ...]


def partial_fractions(system: RationalSystem) -> PartialFractions:
    """Decompose a system exactly."""
    size = system.size
    digits: dict[str, dict[tuple[int, int], dict[tuple[int, int], Any]]] = {}
    factors: dict[str, Univariate] = {}
    polynomial: dict[int, dict[tuple[int, int], Any]] = {}
    factorised: dict[str, list[tuple[Univariate, int]]] = {}
    for at, (p, q) in system.entries.items():
        quotient, rest = divmod(p, q)
        for j, value in enumerate(quotient.coeffs()):
            if value:
                polynomial.setdefault(j, {})[at] = value
        name = str(q)
        if name not in factorised:
            factorised[name] = [(_monic(f), int(m)) for f, m in q.factor()[1]]
        for factor, power in factorised[name]:
            key = str(factor)
            factors[key] = factor
            whole = factor**power
            _, inverse, _ = (q // whole).xgcd(whole)
            part = rest * inverse % whole
            for order in range(power, 0, -1):
                part, digit = divmod(part, factor)
                for j, value in enumerate(digit.coeffs()):
                    if value:
                        digits.setdefault(key, {}).setdefault((order, j), {})[at] = value
    weights = perron_weights(_magnitudes(size, digits))
    poles = tuple(_pole(size, factors[key], digits[key], weights) for key in sorted(digits))
    degree = max(polynomial, default=-1)
    return PartialFractions(
        size, poles, tuple(_matrix(size, polynomial.get(j, {})) for j in range(degree + 1))
    )


def _monic(factor: Univariate) -> Univariate:
    polynomial = flint.fmpq_poly(factor)
    return polynomial / polynomial.leading_coefficient()


def _matrix(size: int, values: dict[tuple[int, int], Any]) -> ExactMatrix:
    matrix = flint.fmpq_mat(size, size)
    for (i, j), value in values.items():
        matrix[i, j] = value
    return matrix


def _magnitudes(size: int, digits: dict[str, dict[tuple[int, int], dict[tuple[int, int], Any]]]) -> Floats:
    total = np.zeros((size, size))
    for parts in digits.values():
        for values in parts.values():
            for at, value in values.items():
                total[at] += _size(value)
    return total


def _pole(
    size: int,
    factor: Univariate,
    parts: dict[tuple[int, int], dict[tuple[int, int], Any]],
    weights: Floats,
) -> Pole:
    order, degree = max(k for k, _ in parts), factor.degree()
    matrices = {at: _matrix(size, values) for at, values in parts.items()}
    stacked = flint.fmpq_mat([row for at in sorted(matrices) for row in matrices[at].table()])
    rows, pivots = row_space(stacked, weights, np.tile(weights, len(matrices)))
    zero = flint.fmpq_mat(size, len(pivots))

    def column(k: int, j: int) -> ExactMatrix:
        if (k, j) not in matrices:
            return zero
        # the rows are a unit matrix in the pivot columns, where their coefficients stand
        matrix = matrices[k, j]
        return flint.fmpq_mat([[matrix[i, c] for c in pivots] for i in range(size)])

    columns = tuple(tuple(column(k, j) for j in range(degree)) for k in range(1, order + 1))
    return Pole(factor, rows, columns)


def row_space(matrix: ExactMatrix, columns: Floats, rows: Floats) -> tuple[ExactMatrix, tuple[int, ...]]:
    """A basis of the rows that is the unit matrix in some columns and small in the others.

    The largest entries serve as pivots: with the first ones, as in echelon forms, nearly dependent rows
    (eps apart) would give entries of the size 1/eps, and digits would be lost at every step of a series.

    Parameters
    ----------
    matrix
        Any matrix over Q.
    columns, rows
        Scales: an entry counts as ``|a_ij| columns_j/rows_i``.

    Returns
    -------
    The basis, and the columns where it is the unit matrix.
    """
    left = [(list(row), float(scale)) for row, scale in zip(matrix.table(), rows, strict=True) if any(row)]
    pivots: list[int] = []
    done: list[list[Any]] = []
    while left:
        r, c = max(
            ((r, c) for r, (row, _) in enumerate(left) for c, value in enumerate(row) if value),
            key=lambda at: _size(left[at[0]][0][at[1]]) * columns[at[1]] / left[at[0]][1],
        )
        head, _ = left.pop(r)
        lead = head[c]
        head = [value / lead if value else value for value in head]
        done = [_eliminated(row, head, c) for row in done]
        rest = [(_eliminated(row, head, c), scale) for row, scale in left]
        left = [(row, scale) for row, scale in rest if any(row)]
        done.append(head)
        pivots.append(c)
    return flint.fmpq_mat(done) if done else flint.fmpq_mat(0, matrix.ncols()), tuple(pivots)


def _eliminated(row: list[Any], head: list[Any], column: int) -> list[Any]:
    factor = row[column]
    if not factor:
        return row
    return [a - factor * b if b else a for a, b in zip(row, head, strict=True)]


def _size(value: Any) -> float:
    return float(abs(int(value.p) / int(value.q)))
