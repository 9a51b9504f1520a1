"""Power series in eps whose coefficients are matrices over the exact constants.

Each coefficient is a sparse sum: monomial in the constants -> rational matrix, so that all heavy work is
FLINT's rational matrix arithmetic.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import flint

from ibpred.iterated.constants.constants import Constant
from ibpred.iterated.constants.generators import Monomial, generator_monomial, multiply_monomials

RationalMatrix = Any  # flint.fmpq_mat
Coefficient = Mapping[Monomial, RationalMatrix]

UNIT = generator_monomial()


@dataclass(frozen=True)
class MatrixSeries:
    """``sum_k eps^k M_k`` truncated after the last order held.

    Attributes
    ----------
    orders
        M_0, M_1, ...: each maps a monomial of the constants to an n x n `flint.fmpq_mat`.
    """

    orders: tuple[Coefficient, ...]

    def __matmul__(self, other: MatrixSeries) -> MatrixSeries:
        length = min(len(self.orders), len(other.orders))
        result: list[dict[Monomial, RationalMatrix]] = [{} for _ in range(length)]
        for j in range(length):
            for left, a in self.orders[j].items():
                for k in range(length - j):
                    for right, b in other.orders[k].items():
                        sign, monomial = multiply_monomials(left, right)
                        accumulate(result[j + k], monomial, sign * (a * b))
        return MatrixSeries(tuple(nonzero(c) for c in result))

    def monomials(self) -> frozenset[Monomial]:
        """All monomials that occur."""
        return frozenset(m for coefficient in self.orders for m in coefficient)

    def entry(self, order: int, row: int, column: int) -> Constant:
        """One entry of one coefficient."""
        return Constant.from_terms({m: a[row, column] for m, a in self.orders[order].items()})


def accumulate(target: dict[Monomial, RationalMatrix], monomial: Monomial, matrix: RationalMatrix) -> None:
    """``target[monomial] += matrix``."""
    target[monomial] = target[monomial] + matrix if monomial in target else matrix


def nonzero(coefficient: Mapping[Monomial, RationalMatrix]) -> dict[Monomial, RationalMatrix]:
    """Without the monomials whose matrix vanishes."""
    return {m: a for m, a in coefficient.items() if a}


def identity(size: int) -> RationalMatrix:
    """The unit matrix."""
    return flint.fmpq_mat(size, size, [int(i == j) for i in range(size) for j in range(size)])


def rational_matrix(rows: Sequence[Sequence[Fraction]]) -> RationalMatrix:
    """A `flint.fmpq_mat` from rows of fractions."""
    width = len(rows[0]) if rows else 0
    return flint.fmpq_mat(
        len(rows), width, [flint.fmpq(v.numerator, v.denominator) for row in rows for v in row]
    )


def exponential(matrix: RationalMatrix, factor: Constant, order: int) -> MatrixSeries:
    """``exp(eps factor matrix)`` through ``eps^order``."""
    orders = []
    power, constant, inverse = identity(matrix.nrows()), Constant.rational(1), flint.fmpq(1)
    for k in range(order + 1):
        if k:
            power = power * matrix
            constant = constant * factor
            inverse = inverse / k
        scaled = ((m, flint.fmpq(c.numerator, c.denominator)) for m, c in constant.terms())
        orders.append(nonzero({m: power * (c * inverse) for m, c in scaled}))
    return MatrixSeries(tuple(orders))


def word_products(
    matrices: Mapping[int, RationalMatrix], order: int
) -> Iterator[tuple[tuple[int, ...], RationalMatrix]]:
    """All words up to a length whose matrix product ``A_w1 ... A_wn`` does not vanish.

    Parameters
    ----------
    matrices
        Letter -> matrix.
    order
        Longest length.

    Yields
    ------
    tuple
        Word and product, the empty word first, by length.
    """
    size = next(iter(matrices.values())).nrows()
    layer: list[tuple[tuple[int, ...], RationalMatrix]] = [((), identity(size))]
    yield from layer
    for _ in range(order):
        grown = []
        for word, tail in layer:
            for letter, matrix in matrices.items():
                head = matrix * tail
                if head:
                    grown.append(((letter, *word), head))
        yield from grown
        layer = grown
