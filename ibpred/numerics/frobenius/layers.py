"""A system with its coefficients of eps^0, eps^1, ...: one larger system, block by block the same.

``J^(k)' = sum_j A_j J^(k-j)`` is a system for all orders together whose matrix is block lower triangular and
depends on the difference of the block numbers only. So is everything that is made of it: solutions that
start at order eps^0 determine all others.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import flint

from ibpred.numerics.frobenius.poles import PartialFractions, Pole
from ibpred.numerics.frobenius.spectrum import ExactMatrix
from ibpred.numerics.frobenius.system import RationalSystem


@dataclass(frozen=True)
class Layers:
    """``J^(k)' = sum_j matrices[j] J^(k-j)``.

    Attributes
    ----------
    size
        Number of functions.
    matrices
        A_0, A_1, ...: as many as there are orders.
    """

    size: int
    matrices: tuple[RationalSystem, ...]

    @property
    def depth(self) -> int:
        return len(self.matrices)


def whole_system(layers: Layers) -> RationalSystem:
    """The system of all orders together, order k of function i in row ``k size + i``."""
    size, depth = layers.size, layers.depth
    entries = {
        (k * size + i, (k - order) * size + j): entry
        for order, layer in enumerate(layers.matrices)
        for (i, j), entry in layer.entries.items()
        for k in range(order, depth)
    }
    return RationalSystem(size * depth, entries)


def block_triangular(blocks: Sequence[ExactMatrix]) -> ExactMatrix:
    """The matrix with ``blocks[k - j]`` in block row k and block column j."""
    size, depth = blocks[0].nrows(), len(blocks)
    tables = [block.table() for block in blocks]
    zero = [flint.fmpq(0)] * size
    rows = []
    for k in range(depth):
        for i in range(size):
            row = [value for j in range(k + 1) for value in tables[k - j][i]]
            rows.append(row + zero * (depth - k - 1))
    return flint.fmpq_mat(rows) if rows else flint.fmpq_mat(0, 0)


def by_functions(fractions: PartialFractions) -> PartialFractions:
    """The same poles, each acting on single functions instead of combinations that span its row space.

    In the system of several orders those combinations cancel against each other: measured, 20 digits an order
    and step are lost with them, none in this form.
    """
    return replace(fractions, poles=tuple(_on_functions(pole) for pole in fractions.poles))


def _on_functions(pole: Pole) -> Pole:
    whole = [[part * pole.rows for part in parts] for parts in pole.columns]
    tables = [matrix.table() for parts in whole for matrix in parts]
    size = pole.rows.ncols()
    used = [j for j in range(size) if any(row[j] != 0 for table in tables for row in table)]
    rows = flint.fmpq_mat([[1 if j == c else 0 for j in range(size)] for c in used])
    columns = tuple(
        tuple(flint.fmpq_mat([[row[j] for j in used] for row in matrix.table()]) for matrix in parts)
        for parts in whole
    )
    return Pole(pole.factor, rows, columns)
