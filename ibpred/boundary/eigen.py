"""Generalised eigenspaces of a residue matrix over Q."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import flint

from ibpred.iterated.matrices import identity


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
