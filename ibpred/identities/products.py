"""Scalar products of loop momenta as combinations of a family's lines."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

from ibpred.errors import InputError
from ibpred.exact.rational import Rational, Ring
from ibpred.family.definition import FamilyDefinition


def rational_inverse(matrix: Sequence[Sequence[Fraction]]) -> list[list[Fraction]]:
    """Inverse of a square matrix of fractions.

    Raises
    ------
    InputError
        If the matrix is singular.
    """
    n = len(matrix)
    work = [
        [Fraction(v) for v in row] + [Fraction(int(i == j)) for j in range(n)] for i, row in enumerate(matrix)
    ]
    for column in range(n):
        pivot = next((r for r in range(column, n) if work[r][column]), None)
        if pivot is None:
            raise InputError("the lines of the family do not determine all scalar products of loop momenta")
        work[column], work[pivot] = work[pivot], work[column]
        scale = work[column][column]
        work[column] = [v / scale for v in work[column]]
        for row in range(n):
            factor = work[row][column]
            if row != column and factor:
                work[row] = [a - factor * b for a, b in zip(work[row], work[column], strict=True)]
    return [row[n:] for row in work]


@dataclass(frozen=True)
class LineSum:
    """``constant + sum_b coefficients[b] * D_b`` over the internal ring."""

    constant: Rational
    coefficients: tuple[Rational, ...]


@dataclass(frozen=True)
class Products:
    """The dictionary between scalar products and lines, the unit set to one.

    Attributes
    ----------
    family
        The family.
    ring
        Its internal ring.
    gram
        E x E external products in the internal ring.
    inverse
        Coefficients of the lines in each scalar product.
    shift
        What is left of each scalar product: ``product = shift + sum_b inverse[b] D_b``.
    """

    family: FamilyDefinition
    ring: Ring
    gram: tuple[tuple[Rational, ...], ...]
    inverse: tuple[tuple[Fraction, ...], ...]
    shift: tuple[Rational, ...]

    def loop_loop(self, i: int, j: int) -> int:
        """Index of k_i.k_j among the scalar products."""
        low, high = min(i, j), max(i, j)
        loops = len(self.family.loops)
        return low * loops - low * (low - 1) // 2 + high - low

    def loop_external(self, i: int, e: int) -> int:
        """Index of k_i.p_e among the scalar products."""
        loops = len(self.family.loops)
        return loops * (loops + 1) // 2 + i * len(self.family.external) + e

    def to_lines(self, constant: Rational, products: dict[int, Rational]) -> LineSum:
        """A polynomial of degree one in the scalar products, written in the lines."""
        coefficients = [self.ring.zero] * len(self.family.lines)
        for index, value in products.items():
            if not value:
                continue
            constant = constant + value * self.shift[index]
            for b, entry in enumerate(self.inverse[index]):
                if entry:
                    coefficients[b] = coefficients[b] + value * entry
        return LineSum(constant, tuple(coefficients))


def internal(value: Rational, family: FamilyDefinition) -> Rational:
    """An element of the kinematic ring with the unit set to one, in the internal ring."""
    ring = family.internal_ring
    if family.unit is None:
        return value.to_ring(ring)
    return value.substitute({family.unit: ring.one})


def products_of(family: FamilyDefinition) -> Products:
    """Solve the lines for the scalar products.

    Raises
    ------
    InputError
        If the lines do not determine every scalar product of a loop momentum.
    """
    loops, legs = len(family.loops), len(family.external)
    pairs = [(i, j) for i in range(loops) for j in range(i, loops)]
    count = len(pairs) + loops * legs
    if len(family.lines) != count:
        raise InputError(f"{family.name}: {count} lines are needed, there are {len(family.lines)}")
    rows = []
    for line in family.lines:
        row = [line.quadratic[i][j] * (1 if i == j else 2) for i, j in pairs]
        row += [line.linear[i][e] for i in range(loops) for e in range(legs)]
        rows.append(row)
    inverse = rational_inverse(rows)
    ring = family.internal_ring
    constants = [internal(line.constant, family) for line in family.lines]
    shift = []
    for entries in inverse:
        total = ring.zero
        for entry, constant in zip(entries, constants, strict=True):
            if entry:
                total = total - constant * entry
        shift.append(total)
    gram = tuple(tuple(internal(value, family) for value in row) for row in family.gram)
    return Products(family, ring, gram, tuple(tuple(row) for row in inverse), tuple(shift))
