"""Generalised eigenspaces of residue matrices over Q, of one or of several that commute."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import flint

from ibpred.errors import BoundaryError
from ibpred.iterated.constants.matrices import identity


@dataclass(frozen=True)
class Eigenspace:
    """One generalised eigenspace of a matrix A.

    Attributes
    ----------
    value
        The eigenvalue; None for the sum of all spaces with irrational eigenvalues.
    chain
        ``(P, N P, N^2 P, ...)`` while nonzero: P projects onto the space along the others, and
        ``N = A - value`` (no powers where `value` is None).
    """

    value: Fraction | None
    chain: tuple[Any, ...]


def eigenspaces(matrix: Any) -> tuple[Eigenspace, ...]:
    """The generalised eigenspaces of a square `flint.fmpq_mat`; their projectors sum to one."""
    size = matrix.nrows()
    _, factors = matrix.charpoly().factor()
    values: list[Fraction | None] = []
    bases: list[list[list[Any]]] = []
    rest = identity(size)
    irrational = False
    for polynomial, multiplicity in sorted(factors, key=lambda item: str(item[0])):
        if polynomial.degree() == 1:
            root = -polynomial[0] / polynomial[1]
            shifted = matrix - root * identity(size)
            values.append(Fraction(int(root.p), int(root.q)))
            bases.append(null_space(_power(shifted, int(multiplicity))))
        else:
            irrational = True
            value = _evaluate(polynomial, matrix)
            rest = rest * _power(value, int(multiplicity))
    if irrational:
        values.append(None)
        bases.append(null_space(rest))
    columns = [vector for basis in bases for vector in basis]
    change = flint.fmpq_mat(size, size, [columns[j][i] for i in range(size) for j in range(size)])
    inverse = change.inv()
    found = []
    at = 0
    for value, basis in zip(values, bases, strict=True):
        chosen = range(at, at + len(basis))
        at += len(basis)
        selector = flint.fmpq_mat(
            size, size, [int(i == j and i in chosen) for i in range(size) for j in range(size)]
        )
        projector = change * selector * inverse
        chain = [projector]
        if value is not None:
            nilpotent = matrix - flint.fmpq(value.numerator, value.denominator) * identity(size)
            while nilpotent * chain[-1]:
                chain.append(nilpotent * chain[-1])
        found.append(Eigenspace(value, tuple(chain)))
    return tuple(found)


@dataclass(frozen=True)
class JointSpace:
    """The common generalised eigenspace of several commuting matrices.

    Attributes
    ----------
    values
        The eigenvalue of each; None stands for all irrational ones together.
    projector
        P, along the other spaces.
    nilpotents
        All nonzero products of the matrices ``N = A - value`` (of those with a rational value), times P:
        which matrices take part, and the product.
    """

    values: tuple[Fraction | None, ...]
    projector: Any
    nilpotents: tuple[tuple[frozenset[int], Any], ...]


def joint_spaces(matrices: Sequence[Any]) -> tuple[JointSpace, ...]:
    """Common generalised eigenspaces; their projectors sum to one.

    Raises
    ------
    BoundaryError
        If the matrices do not commute, as residues at crossing singular loci do.
    """
    for i, left in enumerate(matrices):
        for right in matrices[:i]:
            if left * right != right * left:
                raise BoundaryError(
                    "residues at crossing singular loci do not commute: the differential equation is not "
                    "integrable"
                )
    size = matrices[0].nrows()
    found: list[tuple[tuple[Fraction | None, ...], Any]] = [((), identity(size))]
    for matrix in matrices:
        spaces = eigenspaces(matrix)
        found = [
            ((*values, space.value), common)
            for values, projector in found
            for space in spaces
            if (common := space.chain[0] * projector)
        ]
    return tuple(JointSpace(v, p, _products(matrices, v, p)) for v, p in found)


def _products(
    matrices: Sequence[Any], values: Sequence[Fraction | None], projector: Any
) -> tuple[tuple[frozenset[int], Any], ...]:
    """Nonzero products of nilpotent parts on one joint space, each once for each set of factors."""
    size = projector.nrows()
    layer: list[tuple[frozenset[int], Any]] = [(frozenset(), projector)]
    found: list[tuple[frozenset[int], Any]] = []
    while layer:
        grown = []
        for index, (matrix, value) in enumerate(zip(matrices, values, strict=True)):
            if value is None:
                continue
            nilpotent = matrix - flint.fmpq(value.numerator, value.denominator) * identity(size)
            for factors, vector in layer:
                image = nilpotent * vector
                item = (factors | {index}, image)
                if image and item not in found:
                    found.append(item)
                    grown.append(item)
        layer = grown
    return tuple(found)


def null_space(matrix: Any) -> list[list[Any]]:
    """Basis of the right null space of a `flint.fmpq_mat`, vectors as lists of `flint.fmpq`."""
    reduced, rank = matrix.rref()
    width = matrix.ncols()
    pivots: list[int] = []
    for r in range(rank):
        pivots.append(next(c for c in range(width) if reduced[r, c] != 0))
    basis = []
    for free in (c for c in range(width) if c not in pivots):
        vector = [flint.fmpq(0)] * width
        vector[free] = flint.fmpq(1)
        for r, column in enumerate(pivots):
            vector[column] = -reduced[r, free]
        basis.append(vector)
    return basis


def _power(matrix: Any, exponent: int) -> Any:
    result = identity(matrix.nrows())
    for _ in range(exponent):
        result = result * matrix
    return result


def _evaluate(polynomial: Any, matrix: Any) -> Any:
    total = flint.fmpq_mat(matrix.nrows(), matrix.nrows())
    for coefficient in reversed(polynomial.coeffs()):
        total = total * matrix + flint.fmpq(coefficient) * identity(matrix.nrows())
    return total
