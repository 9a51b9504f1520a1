"""Common factors of rational functions that depend on eps alone."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from fractions import Fraction
from math import gcd, lcm

import flint

from ibpred.epsform.form import Matrix
from ibpred.epsform.matrices import Constants, lifted, product, scaled
from ibpred.epsform.residues.decompose import constants
from ibpred.exact.rational import Polynomial, Rational, Ring


def polynomial_content(polynomial: Polynomial, ring: Ring) -> Polynomial:
    """The largest factor of a polynomial that depends on eps alone, its integer content included."""
    parts: dict[tuple[int, ...], dict[tuple[int, ...], int]] = {}
    index = ring.index("eps")
    for exponents, coefficient in polynomial.to_dict().items():
        rest = [int(e) for e in exponents]
        inner = [0] * len(rest)
        inner[index], rest[index] = rest[index], 0
        parts.setdefault(tuple(rest), {})[tuple(inner)] = coefficient
    total = ring.context.constant(0)
    for terms in parts.values():
        total = total.gcd(ring.context.from_dict(terms))
    return total


def content(values: Iterable[Rational], ring: Ring) -> Rational:
    """The function g(eps) such that the values divided by g have no common factor in eps left.

    Every irreducible polynomial in eps (and every prime number) occurs in g with the smallest
    multiplicity that it has in the nonzero values.
    """
    one = ring.context.constant(1)
    above: list[Polynomial] = []
    below: list[Polynomial] = []
    for value in values:
        if value:
            above.append(polynomial_content(value.numerator, ring))
            below.append(polynomial_content(value.denominator, ring))
    common = one
    for denominator in below:
        common = common * (denominator / common.gcd(denominator))
    top = ring.context.constant(0)
    for numerator, denominator in zip(above, below, strict=True):
        top = top.gcd(numerator * (common / denominator))
    if top.is_zero():
        return ring.one
    return ring.fraction(top, common)


def primitive_columns(matrix: Matrix, ring: Ring) -> Constants:
    """Constants K such that the columns of ``matrix K`` are sparse, with small coprime coefficients.

    The coefficients of the columns as polynomials in eps and x, over one common denominator, are brought
    to reduced echelon form over Q, the first rows of the matrix first; each column is then made primitive.
    """
    columns = len(matrix[0])
    common = ring.context.constant(1)
    for row in matrix:
        for entry in row:
            common = common * (entry.denominator / common.gcd(entry.denominator))
    tables = [[(entry.numerator * (common / entry.denominator)).to_dict() for entry in row] for row in matrix]
    keys = [(i, key) for i, row in enumerate(tables) for key in sorted({k for table in row for k in table})]
    rows = [
        [int(tables[i][j].get(key, 0)) for i, key in keys] + [int(j == k) for k in range(columns)]
        for j in range(columns)
    ]
    width = len(keys) + columns
    reduced, _ = flint.fmpq_mat(columns, width, [e for row in rows for e in row]).rref()
    found = []
    for values in constants(reduced):
        head = values[: len(keys)]
        scale = Fraction(lcm(*(v.denominator for v in head)), 1)
        scale /= gcd(*(int(v * scale) for v in head))
        found.append([v * scale for v in values[len(keys) :]])
    return tuple(zip(*found, strict=True))


def simplified(matrix: Matrix, parts: Sequence[range], ring: Ring) -> tuple[Matrix, Constants]:
    """Simplify the columns of a change of basis, separately for parts that do not couple.

    Parameters
    ----------
    matrix
        T with square shape.
    parts
        Its columns, cut into sets that may be scaled separately.

    Returns
    -------
    matrix
        ``T K`` with each part divided by its content.
    change
        K, block diagonal.
    """
    size = len(matrix)
    columns: list[tuple[Rational, ...]] = []
    change = [[Fraction(0)] * size for _ in range(size)]
    for own in parts:
        block = tuple(tuple(row[j] for j in own) for row in matrix)
        factor = content((e for row in block for e in row), ring)
        block = scaled(block, 1 / factor)
        simple = primitive_columns(block, ring)
        for i, row in zip(own, simple, strict=True):
            for j, value in zip(own, row, strict=True):
                change[i][j] = value
        columns.extend(zip(*product(block, lifted(ring, simple), ring), strict=True))
    return tuple(zip(*columns, strict=True)), tuple(map(tuple, change))
