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

from ibpred.numerics.frobenius.spectrum import ExactMatrix, pivot_columns
from ibpred.numerics.frobenius.system import RationalSystem, Univariate


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
    poles = tuple(_pole(size, factors[key], digits[key]) for key in sorted(digits))
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


def _pole(size: int, factor: Univariate, parts: dict[tuple[int, int], dict[tuple[int, int], Any]]) -> Pole:
    order, degree = max(k for k, _ in parts), factor.degree()
    matrices = {at: _matrix(size, values) for at, values in parts.items()}
    stacked = flint.fmpq_mat([row for at in sorted(matrices) for row in matrices[at].table()])
    echelon, rank = stacked.rref()
    rows = flint.fmpq_mat([[echelon[i, j] for j in range(size)] for i in range(rank)])
    pivots = pivot_columns(echelon, rank)
    zero = flint.fmpq_mat(size, rank)

    def column(k: int, j: int) -> ExactMatrix:
        if (k, j) not in matrices:
            return zero
        # the rows are reduced, so coefficients over them stand in the pivot columns
        matrix = matrices[k, j]
        return flint.fmpq_mat([[matrix[i, c] for c in pivots] for i in range(size)])

    columns = tuple(tuple(column(k, j) for j in range(degree)) for k in range(1, order + 1))
    return Pole(factor, rows, columns)
