"""Linear algebra over Q(eps) for small matrices."""

from __future__ import annotations

from collections.abc import Sequence

from ibpred.exact.rational import Rational, ring

FIELD = ring(("eps",))
"""Q(eps)."""

EPS = FIELD.variable("eps")

Vector = list[Rational]
Matrix = list[Vector]


def zeros(rows: int, columns: int) -> Matrix:
    """A matrix of zeros."""
    return [[FIELD.zero] * columns for _ in range(rows)]


def product(left: Sequence[Sequence[Rational]], right: Sequence[Sequence[Rational]]) -> Matrix:
    """The matrix product."""
    width = len(right[0]) if right else 0
    found = zeros(len(left), width)
    for row, out in zip(left, found, strict=True):
        for value, line in zip(row, right, strict=True):
            if value:
                for j, other in enumerate(line):
                    if other:
                        out[j] = out[j] + value * other
    return found


def echelon(matrix: Sequence[Sequence[Rational]], columns: int) -> tuple[Matrix, tuple[int, ...]]:
    """Reduced row echelon form with respect to the first columns.

    Returns
    -------
    matrix, tuple
        The rows, those with pivots first, and the pivot columns.
    """
    rows = [list(row) for row in matrix]
    pivots: list[int] = []
    for column in range(columns):
        top = len(pivots)
        candidates = [i for i in range(top, len(rows)) if rows[i][column]]
        if not candidates:
            continue
        chosen = min(candidates, key=lambda i: (_size(rows[i][column]), i))
        rows[top], rows[chosen] = rows[chosen], rows[top]
        lead = rows[top][column]
        rows[top] = [value / lead if value else value for value in rows[top]]
        for i, row in enumerate(rows):
            factor = row[column]
            if i != top and factor:
                rows[i] = [a - factor * b if b else a for a, b in zip(row, rows[top], strict=True)]
        pivots.append(column)
    return rows, tuple(pivots)


def _size(value: Rational) -> int:
    return len(value.numerator.to_dict()) + len(value.denominator.to_dict())


def null_space(matrix: Sequence[Sequence[Rational]], columns: int) -> Matrix:
    """The vectors v with ``matrix v = 0``, as the columns of a matrix."""
    rows, pivots = echelon(matrix, columns)
    free = [c for c in range(columns) if c not in pivots]
    found = zeros(columns, len(free))
    for j, c in enumerate(free):
        found[c][j] = FIELD.one
        for row, pivot in zip(rows, pivots, strict=False):
            found[pivot][j] = -row[c]
    return found
