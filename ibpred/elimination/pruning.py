"""Pruning: the part of a system that wanted columns need, with columns renumbered."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ibpred.elimination.discovery import Discovery, dependencies, discover_leading
from ibpred.elimination.system import CoefficientTable, SparseSystem


@dataclass(frozen=True)
class Pruned:
    """A smaller system that reduces the same wanted columns.

    Attributes
    ----------
    system
        The rows kept, columns renumbered in the same order, coefficients likewise.
    wanted
        The wanted columns in the new numbering.
    columns
        int32: original number of each new column.
    rows
        int32: original number of each row.
    """

    system: SparseSystem
    wanted: tuple[int, ...]
    columns: NDArray[np.int32]
    rows: NDArray[np.int32]


def take_rows(system: SparseSystem, rows: NDArray[np.int32]) -> SparseSystem:
    """The given rows of a system in the given order, columns and table as they are."""
    first, last = system.start[rows], system.start[rows + 1]
    length = last - first
    start = np.zeros(len(rows) + 1, np.int64)
    np.cumsum(length, out=start[1:])
    entry = np.arange(start[-1]) - np.repeat(start[:-1] - first, length)
    return SparseSystem(system.columns, start, system.column[entry], system.coefficient[entry], system.table)


def _renumbered(system: SparseSystem, wanted: Sequence[int], rows: NDArray[np.int32]) -> Pruned:
    asked = np.array([int(c) for c in wanted], np.int32)
    columns = np.union1d(system.column, asked).astype(np.int32)
    used = np.unique(system.coefficient)
    small = SparseSystem(
        len(columns),
        system.start,
        np.searchsorted(columns, system.column).astype(np.int32),
        np.searchsorted(used, system.coefficient).astype(np.int32),
        CoefficientTable(system.table.variables, system.table.exponents, system.table.values[used]),
    )
    return Pruned(small, tuple(int(c) for c in np.searchsorted(columns, asked)), columns, rows)


def prune(system: SparseSystem, discovery: Discovery, wanted: Sequence[int]) -> Pruned:
    """Keep the rows that the wanted columns need, in two stages.

    First the rows needed by the full reduction of the discovery; then a leading-only elimination of
    the survivors (at the same point), which uses fewer rows, and its needed rows.

    Parameters
    ----------
    system
        The system that was discovered.
    discovery
        Result of `discover` on it.
    wanted
        Columns; those without pivot are kept as columns.

    Raises
    ------
    ValueError
        If the discovery belongs to another system.
    """
    if discovery.columns != system.columns:
        raise ValueError("the discovery belongs to another system")
    _, needed = dependencies(discovery, wanted)
    rows = discovery.kept[needed]
    first = _renumbered(take_rows(system, rows), wanted, rows)
    leading = discover_leading(first.system, discovery.point, discovery.prime)
    _, needed = dependencies(leading, first.wanted)
    chosen = leading.kept[needed]
    second = _renumbered(take_rows(first.system, chosen), first.wanted, rows[chosen])
    return Pruned(second.system, second.wanted, first.columns[second.columns], second.rows)
