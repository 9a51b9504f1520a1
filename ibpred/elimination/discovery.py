"""Discovery: one elimination at one point modulo one prime, and what can be read off it."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ibpred.elimination.system import SparseSystem
from ibpred.elimination.table import point_values
from ibpred.errors import InputError
from ibpred.kernels.arithmetic import from_residues
from ibpred.kernels.sparse import FULL, LEADING, eliminate
from ibpred.kernels.substitution import needed_rows, substitute_back


@dataclass(frozen=True)
class Discovery:
    """Result of an elimination at one point.

    Attributes
    ----------
    prime, point
        Where.
    columns
        Number of unknowns.
    kept
        int32: the independent rows of the system, in the order tried.
    pivot
        int32: pivot column of each of them.
    pivot_row
        int32 (columns,): place in `kept` of the row with this pivot; -1 for a column without pivot.
    start, column, value
        The reduced rows ``x_pivot = sum_e value_e x_column_e`` in CSR form, columns descending;
        values are balanced residues as float64. Columns that got a pivot later may still occur.
    used_start, used
        For each kept row the places of the rows subtracted from it, in CSR form.
    multiply_adds
        Work done.
    """

    prime: int
    point: tuple[int, ...]
    columns: int
    kept: NDArray[np.int32]
    pivot: NDArray[np.int32]
    pivot_row: NDArray[np.int32]
    start: NDArray[np.int64]
    column: NDArray[np.int32]
    value: NDArray[np.float64]
    used_start: NDArray[np.int64]
    used: NDArray[np.int32]
    multiply_adds: int

    @property
    def rank(self) -> int:
        return len(self.kept)


@dataclass(frozen=True)
class Reduced:
    """Wanted columns expressed in columns without pivot, at one point modulo one prime.

    Attributes
    ----------
    wanted
        The columns asked for.
    masters
        Ascending: the columns without pivot that occur.
    values
        uint64 (wanted, masters): canonical residues.
    """

    wanted: tuple[int, ...]
    masters: tuple[int, ...]
    values: NDArray[np.uint64]


def check_system(system: SparseSystem) -> None:
    """Check what the kernels rely on.

    Raises
    ------
    ValueError
        If the arrays do not fit together, an index is out of range, or columns within a row are not
        strictly descending.
    """
    start, column, coefficient = system.start, system.column, system.coefficient
    entries = len(column)
    if len(start) < 1 or start[0] != 0 or start[-1] != entries or np.any(np.diff(start) < 0):
        raise ValueError("the row starts of the system do not fit its entries")
    if len(coefficient) != entries:
        raise ValueError(f"{entries} columns but {len(coefficient)} coefficients in the system")
    if entries == 0:
        return
    if column.min() < 0 or column.max() >= system.columns:
        raise ValueError(f"a column of the system is outside 0..{system.columns - 1}")
    if coefficient.min() < 0 or coefficient.max() >= len(system.table.values):
        raise ValueError("a coefficient of the system is not in its table")
    inside = np.ones(entries, np.bool_)
    inside[start[:-1][start[:-1] < entries]] = False
    falling = np.empty(entries, np.bool_)
    falling[0] = True
    falling[1:] = column[1:] < column[:-1]
    if np.any(inside & ~falling):
        entry = int(np.nonzero(inside & ~falling)[0][0])
        row = int(np.searchsorted(start, entry, side="right")) - 1
        raise ValueError(f"row {row} of the system does not have strictly descending columns")


def _wanted(wanted: Sequence[int], columns: int) -> NDArray[np.int32]:
    array = np.array([int(c) for c in wanted], np.int64)
    if array.size and (array.min() < 0 or array.max() >= columns):
        raise InputError(f"a wanted column is outside 0..{columns - 1}")
    return array.astype(np.int32)


def _eliminate(
    system: SparseSystem,
    point: Sequence[int],
    prime: int,
    mode: int,
    stops: Sequence[int] = (),
    reached: Callable[[int], None] | None = None,
) -> Discovery:
    check_system(system)
    values = point_values(system.table, point, prime)
    found = eliminate(
        system.columns,
        np.ascontiguousarray(system.start, np.int64),
        np.ascontiguousarray(system.column, np.int32),
        np.ascontiguousarray(system.coefficient, np.int32),
        values,
        float(prime),
        mode,
        stops,
        reached,
    )
    *arrays, operations = found
    kept, pivot, pivot_row, row_start, row_column, row_value, used_start, used = arrays
    return Discovery(
        int(prime),
        tuple(int(x) for x in point),
        system.columns,
        kept,
        pivot,
        pivot_row,
        row_start,
        row_column,
        row_value,
        used_start,
        used,
        int(operations),
    )


def discover(
    system: SparseSystem,
    point: Sequence[int],
    prime: int,
    stops: Sequence[int] = (),
    reached: Callable[[int], None] | None = None,
) -> Discovery:
    """Eliminate a system at one point: independent rows, pivots, reduced rows, dependencies.

    Rows are tried in order; each is reduced by all earlier ones wherever possible, and its largest
    remaining column becomes its pivot (the ordering of Laporta, hep-ph/0102033; modular arithmetic
    to find the independent equations: Kant, arXiv:1309.7287).

    Parameters
    ----------
    system
        The equations.
    point
        Values of the table's variables; should be random.
    prime
        An odd prime below 2**49.
    stops, reached
        Ascending numbers of rows; `reached` is told, as the work goes on, how many of them are behind.

    Raises
    ------
    InputError
        If the point or the prime does not fit.
    ValueError
        If the system is malformed.
    """
    return _eliminate(system, point, prime, FULL, stops, reached)


def discover_leading(system: SparseSystem, point: Sequence[int], prime: int) -> Discovery:
    """As `discover`, but a row is reduced only until its largest column has no pivot row.

    Stored rows stay short; fewer rows are used for each than in the full reduction.
    """
    return _eliminate(system, point, prime, LEADING)


def dependencies(discovery: Discovery, wanted: Sequence[int]) -> tuple[NDArray[np.int32], NDArray[np.int32]]:
    """Trace back from wanted columns.

    Returns
    -------
    substituted
        int32: pivot columns that take part in the back substitution of the wanted ones, ascending.
    rows
        int32: places in `discovery.kept` of all rows needed, ascending.
    """
    marked, needed = needed_rows(
        _wanted(wanted, discovery.columns),
        discovery.pivot,
        discovery.pivot_row,
        discovery.start,
        discovery.column,
        discovery.used_start,
        discovery.used,
    )
    columns = np.sort(discovery.pivot[marked.astype(np.bool_)])
    return columns, np.nonzero(needed)[0].astype(np.int32)


def reduced(discovery: Discovery, wanted: Sequence[int]) -> Reduced:
    """Full reduction of wanted columns at the discovery's point.

    A wanted column without pivot is its own reduction.
    """
    columns = _wanted(wanted, discovery.columns)
    marked, _ = needed_rows(
        columns,
        discovery.pivot,
        discovery.pivot_row,
        discovery.start,
        discovery.column,
        discovery.used_start,
        discovery.used,
    )
    place, start, column, value = substitute_back(
        discovery.columns,
        marked,
        discovery.pivot_row,
        discovery.start,
        discovery.column,
        discovery.value,
        float(discovery.prime),
    )
    rows: list[tuple[NDArray[np.int32], NDArray[np.uint64]]] = []
    for c in columns:
        k = place[c]
        if k < 0:
            rows.append((np.array([c], np.int32), np.ones(1, np.uint64)))
        else:
            part = slice(start[k], start[k + 1])
            rows.append((column[part], from_residues(value[part], discovery.prime)))
    masters = np.unique(np.concatenate([r[0] for r in rows])) if rows else np.empty(0, np.int32)
    values = np.zeros((len(columns), len(masters)), np.uint64)
    for i, (where, what) in enumerate(rows):
        values[i, np.searchsorted(masters, where)] = what
    return Reduced(tuple(int(c) for c in columns), tuple(int(c) for c in masters), values)


def masters_of(discovery: Discovery, wanted: Sequence[int]) -> tuple[int, ...]:
    """The columns without pivot that occur in the reduction of the wanted columns, ascending."""
    return reduced(discovery, wanted).masters
