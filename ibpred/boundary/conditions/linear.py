"""The linear system over Q behind the boundary constants.

An unknown is the rational coefficient of one monomial of constants in one component of one order c^(k).
Transport matrices have uniform weight (order k, weight k), so unknowns with different k - weight never meet:
the system splits by this *deficit*.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import flint

from ibpred.boundary.conditions.conditions import Condition
from ibpred.errors import BoundaryError
from ibpred.iterated.constants.constants import Constant
from ibpred.iterated.constants.generators import (
    GENERATORS,
    NAMES,
    Monomial,
    is_odd,
    monomial_weight,
    monomials_of_weight,
    multiply_monomials,
)
from ibpred.iterated.constants.matrices import MatrixSeries
from ibpred.progress import SILENT, Progress

Unknown = tuple[int, int, Monomial]
"""(order, row, monomial)."""

Entries = Sequence[tuple[int, int, Any]]
"""Nonzero (row, column, flint.fmpq) of a matrix."""


@dataclass(frozen=True)
class Transported:
    """A condition on the boundary vector at x = 0.

    Attributes
    ----------
    condition
        The condition at its point.
    orders
        For each power of eps: monomial and the nonzero entries of ``rows @ Z_k``.
    """

    condition: Condition
    orders: tuple[tuple[tuple[Monomial, Entries], ...], ...]


@dataclass(frozen=True)
class Outcome:
    """What the conditions determine.

    Attributes
    ----------
    values
        Nonzero coefficients.
    counts
        For each condition the number of equations and how many of them were new.
    open
        The (order, row) pairs that are not fully determined.
    """

    values: Mapping[Unknown, Fraction]
    counts: tuple[tuple[int, int], ...]
    open: tuple[tuple[int, int], ...]

    def constant(self, order: int, row: int) -> Constant:
        """One component of one order, where it is determined."""
        terms = {m: v for (k, i, m), v in self.values.items() if k == order and i == row}
        return Constant.from_terms(terms)


def transported(condition: Condition, transport: MatrixSeries) -> Transported:
    """Bring a condition to x = 0."""
    orders = []
    for coefficient in transport.orders:
        pieces = []
        for monomial, matrix in coefficient.items():
            entries = _entries(condition.rows * matrix)
            if entries:
                pieces.append((monomial, entries))
        orders.append(tuple(pieces))
    return Transported(condition, tuple(orders))


def _entries(matrix: Any) -> Entries:
    width = matrix.ncols()
    return [(n // width, n % width, value) for n, value in enumerate(matrix.entries()) if value != 0]


def solve_all(
    system: Sequence[Transported],
    starts: Sequence[int],
    weight: int,
    last: int,
    real: bool,
    progress: Progress = SILENT,
) -> Outcome:
    """Solve for all components through ``eps^weight``, with equations through ``eps^last``.

    Parameters
    ----------
    system
        The conditions, in the order in which they are to be believed.
    starts
        First order of each component; its weight at order k is at most k minus it.
    weight, last
        See above.
    real
        Whether the boundary vector is real; else ``i pi`` is among its constants.
    progress
        Told about the conditions used.

    Raises
    ------
    BoundaryError
        If conditions contradict each other.
    """
    ansatz = _ansatz(system, real)
    _check_weights(system, min(starts), last)
    values: dict[Unknown, Fraction] = {}
    counts = [(0, 0)] * len(system)
    open_pairs: set[tuple[int, int]] = set()
    for deficit in range(min(starts), weight + 1):
        columns = _columns(starts, deficit, last, ansatz)
        echelon = flint.fmpq_mat(0, len(columns) + 1)
        for index, item in enumerate(system):
            progress.advance(index, len(system))
            rows = _equations(item, columns, deficit, last, ansatz)
            before = echelon.nrows()
            echelon = _extended(echelon, rows, len(columns))
            if _contradicts(echelon):
                raise BoundaryError(
                    f"the condition '{item.condition.name}' contradicts the conditions before it: the "
                    "differential equation, the epsilon-form or a closed form is wrong"
                )
            total, new = counts[index]
            counts[index] = total + len(rows), new + echelon.nrows() - before
        fixed = _read_off(echelon, columns)
        values |= {unknown: value for unknown, value in fixed.items() if value and unknown[0] <= weight}
        open_pairs |= {(k, i) for (k, i, m) in columns if k <= weight and (k, i, m) not in fixed}
    return Outcome(values, tuple(counts), tuple(sorted(open_pairs)))


def _check_weights(system: Sequence[Transported], first: int, last: int) -> None:
    """No value may be of a higher weight than the ansatz allows: it would be lost."""
    for item in system:
        for series in (value for value in item.condition.values if value is not None):
            for order in range(series.start, min(series.end, last) + 1):
                weights = [monomial_weight(monomial) for monomial, _ in series.coefficient(order).terms()]
                heaviest = max(weights, default=order - first)  # a zero has no weight at all
                if heaviest > order - first:
                    raise BoundaryError(
                        f"the condition '{item.condition.name}' holds constants of weight {heaviest} at "
                        f"eps^{order}, more than the boundary constants can have, which begin at eps^{first}"
                    )


@dataclass(frozen=True)
class _Ansatz:
    """Generators that boundary constants may hold, with the step of their exponents.

    Attributes
    ----------
    steps
        For the real ones.
    phases
        Whether odd monomials, the imaginary parts of iterated integrals, come with I.
    factors
        Powers of I that may multiply each monomial.
    """

    steps: Mapping[str, int]
    phases: bool
    factors: tuple[int, ...]

    def monomials(self, weight: int) -> tuple[Monomial, ...]:
        """All monomials of one weight."""
        found = monomials_of_weight(weight, self.steps)
        if self.phases:
            return tuple((int(is_odd(m)), *m[1:]) for m in found)
        return tuple((power, *m[1:]) for m in found for power in self.factors)


_PI = NAMES.index("pi")


def _ansatz(system: Sequence[Transported], real: bool) -> _Ansatz:
    used = {"pi", "zeta3", "zeta5", "zeta7", "zeta9", "zeta53"}
    odd = False
    for item in system:
        for order in item.orders:
            for monomial, _ in order:
                used |= {NAMES[i] for i, e in enumerate(monomial) if e}
        for value in item.condition.values:
            for constant in value.coefficients if value is not None else ():
                for monomial, _ in constant.terms():
                    used |= {NAMES[i] for i, e in enumerate(monomial) if e}
                    odd = odd or (bool(monomial[_PI] % 2) if real else is_odd(monomial))
    # real boundary vectors hold pi in even powers, others i pi, unless a closed form says otherwise
    names = [g.name for g in GENERATORS if g.name in used and g.name != "I"]
    steps = {name: 2 if name == "pi" and real and not odd else 1 for name in names}
    return _Ansatz(steps, not real and not odd, (0,) if real else (0, 1))


def _columns(starts: Sequence[int], deficit: int, last: int, ansatz: _Ansatz) -> dict[Unknown, int]:
    columns: dict[Unknown, int] = {}
    for k in range(deficit, last + 1):
        for i, start in enumerate(starts):
            if start <= deficit:
                for monomial in ansatz.monomials(k - deficit):
                    columns[k, i, monomial] = len(columns)
    return columns


def _equations(
    item: Transported, columns: Mapping[Unknown, int], deficit: int, last: int, ansatz: _Ansatz
) -> list[dict[int, Any]]:
    """Nonzero equations of one condition: column -> coefficient, the right-hand side in column -1."""
    result: list[dict[int, Any]] = []
    for order in range(deficit, min(last, deficit + len(item.orders) - 1) + 1):
        if item.condition.only not in (None, order):
            continue
        rows: dict[tuple[int, Monomial], dict[int, Any]] = {}
        for j in range(order - deficit + 1):
            for right in ansatz.monomials(order - j - deficit):
                for left, entries in item.orders[j]:
                    sign, product = multiply_monomials(left, right)
                    for r, i, value in entries:
                        column = columns.get((order - j, i, right))
                        if column is not None:
                            row = rows.setdefault((r, product), {})
                            row[column] = row.get(column, 0) + sign * value
        for r, series in enumerate(item.condition.values):
            if series is None:
                continue
            for monomial, coefficient in series.coefficient(order).terms():
                if monomial_weight(monomial) == order - deficit:
                    row = rows.setdefault((r, monomial), {})
                    row[-1] = flint.fmpq(coefficient.numerator, coefficient.denominator)
        for row in rows.values():
            kept = {column: value for column, value in row.items() if value != 0}
            if kept:
                result.append(kept)
    return result


def _extended(echelon: Any, rows: Sequence[Mapping[int, Any]], width: int) -> Any:
    """Reduced echelon form with more rows; only nonzero rows are kept."""
    if not rows:
        return echelon
    held = echelon.nrows()
    matrix = flint.fmpq_mat(held + len(rows), width + 1)
    for r, row in enumerate(_entries_by_row(echelon)):
        for column, value in row:
            matrix[r, column] = value
    for r, equation in enumerate(rows):
        for column, value in equation.items():
            matrix[held + r, column if column >= 0 else width] = value
    reduced, rank = matrix.rref()
    entries = reduced.entries()[: rank * (width + 1)]
    return flint.fmpq_mat(rank, width + 1, entries)


def _entries_by_row(matrix: Any) -> list[list[tuple[int, Any]]]:
    rows: list[list[tuple[int, Any]]] = [[] for _ in range(matrix.nrows())]
    for r, column, value in _entries(matrix):
        rows[r].append((column, value))
    return rows


def _contradicts(echelon: Any) -> bool:
    """Whether the last row says 0 = 1."""
    last, width = echelon.nrows() - 1, echelon.ncols() - 1
    return last >= 0 and all(echelon[last, c] == 0 for c in range(width))


def _read_off(echelon: Any, columns: Mapping[Unknown, int]) -> dict[Unknown, Fraction]:
    """The unknowns that the equations determine: rows with one unknown."""
    names = {column: unknown for unknown, column in columns.items()}
    found: dict[Unknown, Fraction] = {}
    for row in _entries_by_row(echelon):
        unknowns = [column for column, _ in row if column in names]
        if len(unknowns) == 1:
            value = next((v for column, v in row if column == len(columns)), flint.fmpq(0))
            found[names[unknowns[0]]] = Fraction(int(value.p), int(value.q))
    return found
