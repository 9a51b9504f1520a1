"""Exact eigenvalues and generalised eigenvectors of a residue matrix over Q."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import floor
from typing import Any

import flint

from ibpred.errors import UnfinishedError
from ibpred.numerics.frobenius.system import fmpq, fraction

ExactMatrix = Any
"""``flint.fmpq_mat``."""


@dataclass(frozen=True)
class Spectrum:
    """``basis^-1 R basis = diag(exponents) + nilpotent``, the two commuting.

    Attributes
    ----------
    exponents
        One for each basis vector; equal ones stand together, ascending.
    basis, inverse
        The basis vectors as columns, and the inverse matrix.
    nilpotent
        The nilpotent part in this basis; nonzero only between equal exponents.
    """

    exponents: tuple[Fraction, ...]
    basis: ExactMatrix
    inverse: ExactMatrix
    nilpotent: ExactMatrix

    def classes(self) -> tuple[Fraction, ...]:
        """The exponents modulo the integers, each in [0, 1), ascending."""
        return tuple(sorted({fractional_part(e) for e in self.exponents}))


def fractional_part(value: Fraction) -> Fraction:
    """``value`` modulo the integers, in [0, 1)."""
    return value - floor(value)


def spectrum(residue: ExactMatrix, place: str) -> Spectrum:
    """The spectral decomposition of a matrix with rational eigenvalues.

    Parameters
    ----------
    residue
        Square matrix.
    place
        Name of the point, for messages.

    Raises
    ------
    UnfinishedError
        If an eigenvalue is not rational.
    """
    size = residue.nrows()
    multiplicities: dict[Fraction, int] = {}
    for block in coupled_blocks(residue):
        part = flint.fmpq_mat([[residue[i, j] for j in block] for i in block])
        for root, count in _rational_roots(part.charpoly(), place):
            multiplicities[root] = multiplicities.get(root, 0) + count
    exponents: list[Fraction] = []
    columns: list[list[Any]] = []
    for value in sorted(multiplicities):
        exponents += [value] * multiplicities[value]
        columns += _generalised_eigenvectors(residue, value, multiplicities[value])
    basis = flint.fmpq_mat(columns).transpose() if size else flint.fmpq_mat(0, 0)
    inverse = basis.inv()
    nilpotent = inverse * residue * basis
    for i, value in enumerate(exponents):
        nilpotent[i, i] = nilpotent[i, i] - fmpq(value)
    return Spectrum(tuple(exponents), basis, inverse, nilpotent)


def coupled_blocks(matrix: ExactMatrix) -> list[list[int]]:
    """Strongly coupled sets of indices: the matrix is block triangular with these blocks."""
    size = matrix.nrows()
    reach = [{j for j in range(size) if j == i or matrix[i, j] != 0} for i in range(size)]
    for middle in range(size):
        for row in reach:
            if middle in row:
                row |= reach[middle]
    blocks: list[list[int]] = []
    seen: set[int] = set()
    for i in range(size):
        if i not in seen:
            block = [j for j in sorted(reach[i]) if i in reach[j]]
            seen.update(block)
            blocks.append(block)
    return blocks


def _rational_roots(polynomial: Any, place: str) -> list[tuple[Fraction, int]]:
    roots = []
    for factor, count in polynomial.factor()[1]:
        if factor.degree() != 1:
            raise UnfinishedError(f"at {place} an exponent is not rational: it is a root of {factor}")
        p = factor.coeffs()
        roots.append((fraction(-flint.fmpq(p[0]) / flint.fmpq(p[1])), int(count)))
    return roots


def _generalised_eigenvectors(matrix: ExactMatrix, value: Fraction, count: int) -> list[list[Any]]:
    size = matrix.nrows()
    shift = flint.fmpq_mat(matrix)
    for i in range(size):
        shift[i, i] = shift[i, i] - fmpq(value)
    power = shift
    while True:
        vectors = null_space(power)
        if len(vectors) == count:
            return vectors
        power = power * shift


def null_space(matrix: ExactMatrix) -> list[list[Any]]:
    """A basis of ``{v: matrix v = 0}``."""
    echelon, rank = matrix.rref()
    width = matrix.ncols()
    pivots = pivot_columns(echelon, rank)
    vectors = []
    for free in range(width):
        if free in pivots:
            continue
        vector = [flint.fmpq(0)] * width
        vector[free] = flint.fmpq(1)
        for row, column in enumerate(pivots):
            vector[column] = -echelon[row, free]
        vectors.append(vector)
    return vectors


def pivot_columns(echelon: ExactMatrix, rank: int) -> list[int]:
    """Pivot columns of a matrix in reduced row echelon form."""
    pivots = []
    column = 0
    for row in range(rank):
        while echelon[row, column] == 0:
            column += 1
        pivots.append(column)
    return pivots


def from_rows(rows: Sequence[Sequence[Any]], width: int) -> ExactMatrix:
    """A matrix from its rows; there may be none."""
    return flint.fmpq_mat([list(row) for row in rows]) if rows else flint.fmpq_mat(0, width)
