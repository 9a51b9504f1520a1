"""Small matrices of exact rational functions, as nested tuples."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from ibpred.epsform.form import Matrix
from ibpred.exact.rational import Rational, Ring

Constants = tuple[tuple[Fraction, ...], ...]
"""A matrix of rational numbers."""


def identity(ring: Ring, size: int) -> Matrix:
    """The unit matrix."""
    return tuple(tuple(ring.one if i == j else ring.zero for j in range(size)) for i in range(size))


def lifted(ring: Ring, matrix: Constants) -> Matrix:
    """A matrix of numbers as a matrix over the ring."""
    return tuple(tuple(ring.constant(value) for value in row) for row in matrix)


def dot(ring: Ring, left: Sequence[Rational], right: Sequence[Rational]) -> Rational:
    """Sum of products; zeros cost nothing."""
    total: Rational | None = None
    for a, b in zip(left, right, strict=True):
        if a and b:
            total = a * b if total is None else total + a * b
    return ring.zero if total is None else total


def product(left: Matrix, right: Matrix, ring: Ring) -> Matrix:
    """Matrix product."""
    columns = tuple(zip(*right, strict=True))
    return tuple(tuple(dot(ring, row, column) for column in columns) for row in left)


def added(left: Matrix, right: Matrix) -> Matrix:
    """Sum."""
    return tuple(
        tuple(a + b if b else a for a, b in zip(x, y, strict=True)) for x, y in zip(left, right, strict=True)
    )


def subtracted(left: Matrix, right: Matrix) -> Matrix:
    """Difference."""
    return tuple(
        tuple(a - b if b else a for a, b in zip(x, y, strict=True)) for x, y in zip(left, right, strict=True)
    )


def scaled(matrix: Matrix, factor: Rational) -> Matrix:
    """Every entry times a factor."""
    return tuple(tuple(entry * factor if entry else entry for entry in row) for row in matrix)


def derivative(matrix: Matrix, name: str) -> Matrix:
    """Entrywise derivative."""
    return tuple(tuple(entry.derivative(name) if entry else entry for entry in row) for row in matrix)


def vanishes(matrix: Matrix) -> bool:
    """Whether every entry is zero."""
    return not any(entry for row in matrix for entry in row)


def part(matrix: Matrix, rows: Sequence[int], columns: Sequence[int]) -> Matrix:
    """The submatrix with the given rows and columns, in the given order."""
    return tuple(tuple(matrix[i][j] for j in columns) for i in rows)


def solve(matrix: Matrix, right: Matrix, ring: Ring) -> Matrix:
    """X with ``matrix X = right``, by elimination with the sparsest row as pivot.

    Raises
    ------
    ZeroDivisionError
        If the matrix is singular.
    """
    size = len(matrix)
    rows = [[*a, *b] for a, b in zip(matrix, right, strict=True)]
    for column in range(size):
        candidates = [i for i in range(column, size) if rows[i][column]]
        if not candidates:
            raise ZeroDivisionError("singular matrix of rational functions")
        best = min(candidates, key=lambda i: (sum(map(bool, rows[i])), len(str(rows[i][column]))))
        rows[column], rows[best] = rows[best], rows[column]
        pivot = rows[column]
        head = pivot[column]
        for i in range(size):
            factor = rows[i][column]
            if i == column or not factor:
                continue
            ratio = factor / head
            rows[i] = [a - ratio * b if b else a for a, b in zip(rows[i], pivot, strict=True)]
    return tuple(
        tuple(entry / rows[i][i] if entry else entry for entry in rows[i][size:]) for i in range(size)
    )


def inverse(matrix: Matrix, ring: Ring) -> Matrix:
    """Inverse matrix.

    Raises
    ------
    ZeroDivisionError
        If the matrix is singular.
    """
    return solve(matrix, identity(ring, len(matrix)), ring)
