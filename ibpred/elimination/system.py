"""A sparse homogeneous linear system whose coefficients are polynomials held in one table."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True)
class CoefficientTable:
    """The distinct coefficients of a system: integer polynomials in a few monomials.

    Attributes
    ----------
    variables
        Names, in the order of a sample point, e.g. ``("d", "t")``.
    exponents
        int64, (monomials, variables).
    values
        int64, (coefficients, monomials): coefficient c is ``sum_m values[c, m] * monomial_m``.
    """

    variables: tuple[str, ...]
    exponents: NDArray[np.int64]
    values: NDArray[np.int64]


@dataclass(frozen=True)
class SparseSystem:
    """Equations ``sum_k table[coefficient_k] * unknown[column_k] = 0`` in CSR form.

    Columns are ranked: a larger column is a more complicated unknown and is eliminated first (the
    pivot of a row is its largest column). Within a row columns are sorted in descending order and
    distinct. Rows come in the order in which they are to be tried, simple ones first.

    Attributes
    ----------
    columns
        Number of unknowns.
    start
        int64, (rows + 1,): row r holds the entries ``start[r]:start[r+1]``.
    column
        int32, (entries,).
    coefficient
        int32, (entries,): index into the table.
    table
        The coefficients.
    """

    columns: int
    start: NDArray[np.int64]
    column: NDArray[np.int32]
    coefficient: NDArray[np.int32]
    table: CoefficientTable

    @property
    def rows(self) -> int:
        return len(self.start) - 1
