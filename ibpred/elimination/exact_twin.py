"""A slow twin of the engine over Q(variables), for small systems: the reference that tests compare with."""

from __future__ import annotations

from collections.abc import Sequence

from ibpred.elimination.system import SparseSystem
from ibpred.exact.rational import Rational, ring

Row = dict[int, Rational]


def exact_rows(system: SparseSystem) -> list[Row]:
    """The rows of a system as dictionaries column -> coefficient."""
    field = ring(system.table.variables)
    one = field.polynomial({(0,) * len(system.table.variables): 1})
    exponents = [tuple(int(e) for e in row) for row in system.table.exponents]
    table = []
    for values in system.table.values.tolist():
        terms: dict[tuple[int, ...], int] = {}
        for monomial, value in zip(exponents, values, strict=True):
            if value:
                terms[monomial] = terms.get(monomial, 0) + value
        table.append(field.fraction(field.polynomial(terms), one))
    rows = []
    for r in range(system.rows):
        part = slice(int(system.start[r]), int(system.start[r + 1]))
        row = {}
        for c, k in zip(system.column[part].tolist(), system.coefficient[part].tolist(), strict=True):
            if table[k]:
                row[c] = table[k]
        rows.append(row)
    return rows


def solve_exact(system: SparseSystem, wanted: Sequence[int]) -> dict[int, Row]:
    """Reduce wanted columns over the field of rational functions.

    Returns
    -------
    wanted column -> ``{column: coefficient}`` over columns without pivot; a wanted column without pivot
    is its own reduction.
    """
    reduced: dict[int, Row] = {}
    for row in exact_rows(system):
        while row:
            hit = max((c for c in row if c in reduced), default=None)
            if hit is None:
                break
            value = row.pop(hit)
            _add(row, reduced[hit], value)
        if row:
            pivot = max(row)
            scale = -(row.pop(pivot) ** -1)
            reduced[pivot] = {c: v * scale for c, v in row.items()}
    solved: dict[int, Row] = {}
    one = ring(system.table.variables).one
    for pivot in sorted(reduced):
        total: Row = {}
        for c, v in reduced[pivot].items():
            _add(total, solved.get(c, {c: one}), v)
        solved[pivot] = total
    return {int(c): solved.get(int(c), {int(c): one}) for c in wanted}


def _add(row: Row, other: Row, factor: Rational) -> None:
    for c, v in other.items():
        total = row[c] + factor * v if c in row else factor * v
        if total:
            row[c] = total
        else:
            del row[c]
