"""Equations between integrals handed to the elimination."""

from __future__ import annotations

from ibpred.elimination.system import CoefficientTable, SparseSystem
from ibpred.identities.rows import IntegralRows


def sparse_system(rows: IntegralRows) -> SparseSystem:
    """The same rows as the elimination takes them."""
    table = CoefficientTable(rows.variables, rows.exponents, rows.values)
    return SparseSystem(rows.columns, rows.start, rows.column, rows.coefficient, table)
