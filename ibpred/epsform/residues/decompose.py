"""Direct sums: canonical residues that fall apart in a suitable constant basis."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from random import Random
from typing import Any

import flint

from ibpred.epsform.matrices import Constants

RationalMatrix = Any  # flint.fmpq_mat


def exact_matrix(matrix: Sequence[Sequence[Fraction]]) -> RationalMatrix:
    """Rows of fractions as a FLINT matrix."""
    flat = [flint.fmpq(v.numerator, v.denominator) for row in matrix for v in row]
    return flint.fmpq_mat(len(matrix), len(matrix[0]) if matrix else 0, flat)


def constants(matrix: RationalMatrix) -> Constants:
    """A FLINT matrix as rows of fractions."""
    return tuple(tuple(Fraction(int(v.p), int(v.q)) for v in row) for row in matrix.tolist())


def conjugated(matrix: Constants, change: Constants) -> Constants:
    """``K^-1 M K``."""
    k = exact_matrix(change)
    return constants(k.inv() * exact_matrix(matrix) * k)


def null_space(matrix: RationalMatrix) -> list[list[Fraction]]:
    """A basis of the null space over Q, each vector with a one at its free place."""
    reduced, rank = matrix.rref()
    rows = constants(reduced)
    pivots = [next(j for j, v in enumerate(rows[i]) if v) for i in range(rank)]
    width = matrix.ncols()
    found = []
    for free in (j for j in range(width) if j not in pivots):
        vector = [Fraction(int(j == free)) for j in range(width)]
        for i, pivot in enumerate(pivots):
            vector[pivot] = -rows[i][free]
        found.append(vector)
    return found


def commutant(matrices: Sequence[Constants]) -> list[RationalMatrix]:
    """A basis of the matrices that commute with all the given ones."""
    size = len(matrices[0])
    rows: list[list[Fraction]] = []
    for a in matrices:
        for i in range(size):
            for j in range(size):
                row = [Fraction(0)] * (size * size)
                for k in range(size):
                    row[k * size + j] += a[i][k]
                    row[i * size + k] -= a[k][j]
                if any(row):
                    rows.append(row)
    if not rows:
        vectors = [[Fraction(int(i == j)) for j in range(size * size)] for i in range(size * size)]
    else:
        vectors = null_space(exact_matrix(rows))
    return [exact_matrix([v[i * size : (i + 1) * size] for i in range(size)]) for v in vectors]


def decomposed(matrices: Sequence[Constants], seed: int) -> tuple[Constants, tuple[range, ...]]:
    """A basis in which the matrices are block diagonal, and the blocks.

    A random element of the commutant has its generalised eigenspaces (one for each irreducible factor of
    its characteristic polynomial) as invariant subspaces.

    Parameters
    ----------
    matrices
        At least one.
    seed
        Of the random element; an unlucky one leaves a block whole.
    """
    size = len(matrices[0])
    basis = commutant(matrices)
    random = Random(seed)
    element = flint.fmpq_mat(size, size)
    for matrix in basis:
        element = element + matrix * random.randrange(-50, 51)
    columns: list[list[Fraction]] = []
    parts: list[range] = []
    _, factors = element.charpoly().factor()
    for factor, power in factors:
        value = flint.fmpq_mat(size, size)
        unit = exact_matrix([[Fraction(int(i == j)) for j in range(size)] for i in range(size)])
        for coefficient in reversed(factor.coeffs()):
            value = value * element + unit * coefficient
        whole = unit
        for _ in range(int(power)):
            whole = whole * value
        vectors = null_space(whole)
        parts.append(range(len(columns), len(columns) + len(vectors)))
        columns.extend(vectors)
    return tuple(zip(*columns, strict=True)), tuple(parts)
