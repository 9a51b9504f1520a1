"""Sparse elimination modulo a prime: one row after the other, the pivot is the largest column."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any

import numpy as np
from numba import njit

from ibpred.kernels.arithmetic import invert, multiply
from ibpred.kernels.columns import empty_columns, insert, largest, remove
from ibpred.kernels.memory import grown, pointer
from ibpred.kernels.rowsum import accumulate

FULL = 0
"""Reduce every column of a row by the pivot rows known so far."""
LEADING = 1
"""Reduce a row only until its largest column has no pivot row."""


@njit(cache=True)
def _eliminate_rows(  # type: ignore[no-untyped-def]
    start_array,
    column_array,
    coefficient_array,
    coefficient_values_array,
    bottom_array,
    middle_array,
    top_array,
    work_array,
    present_array,
    tail_array,
    sources_array,
    kept_array,
    pivot_array,
    pivot_row_array,
    row_start_array,
    row_column_array,
    row_value_array,
    used_start_array,
    used_array,
    state,
    p,
    mode,
):
    """Eliminate rows from ``state[0]`` on, as long as the storage lasts.

    state: next row, rank, room wanted in the rows, room wanted in the lists of sources, operations.
    """
    start = pointer(start_array)
    column = pointer(column_array)
    coefficient = pointer(coefficient_array)
    coefficient_values = pointer(coefficient_values_array)
    bottom = pointer(bottom_array)
    middle = pointer(middle_array)
    top = pointer(top_array)
    work = pointer(work_array)
    present = pointer(present_array)
    tail = pointer(tail_array)
    sources = pointer(sources_array)
    kept = pointer(kept_array)
    pivot = pointer(pivot_array)
    pivot_row = pointer(pivot_row_array)
    row_start = pointer(row_start_array)
    row_column = pointer(row_column_array)
    row_value = pointer(row_value_array)
    used_start = pointer(used_start_array)
    used = pointer(used_array)
    rows = start_array.shape[0] - 1
    row_room, used_room = row_column_array.shape[0], used_array.shape[0]
    inverse_p = 1.0 / p
    half = 0.5 * p
    rank = state[1]
    stored = row_start[rank]
    listed = used_start[rank]
    operations = state[4]
    for row in range(state[0], rows):
        c = -1
        for e in range(start[row], start[row + 1]):
            target = column[e]
            if e == start[row]:
                c = target + np.int64(0)
            work[target] = coefficient_values[coefficient[e]]
            present[target] = 1
            insert(bottom, middle, top, target)
        c = largest(bottom, middle, top, c)
        leader = -1
        length = 0
        steps = 0
        done = operations
        while c >= 0:
            value = work[c]
            place = pivot_row[c]
            remove(bottom, middle, top, c)
            present[c] = 0
            if value != 0.0:
                if place >= 0 and (leader < 0 or mode == FULL):
                    sources[steps] = place
                    steps += 1
                    begin, end = row_start[place], row_start[place + 1]
                    done += end - begin
                    for e in range(begin, end):
                        target = row_column[e]
                        r = multiply(value, row_value[e], p, inverse_p)
                        accumulate(work, present, bottom, middle, top, target, r, p, half)
                elif leader < 0:
                    leader = c
                else:
                    tail[length] = c
                    length += 1
            c = largest(bottom, middle, top, c)
        if leader >= 0:
            if stored + length > row_room or listed + steps > used_room:
                state[0], state[1] = row, rank
                state[2], state[3] = stored + length, listed + steps
                state[4] = operations
                return
            scale = -invert(work[leader], p)
            for i in range(length):
                row_column[stored + i] = tail[i]
                row_value[stored + i] = multiply(work[tail[i]], scale, p, inverse_p)
            for i in range(steps):
                used[listed + i] = sources[i]
            stored += length
            listed += steps
            kept[rank] = row
            pivot[rank] = leader
            pivot_row[leader] = rank
            rank += 1
            row_start[rank] = stored
            used_start[rank] = listed
        operations = done
    state[0], state[1] = rows, rank
    state[4] = operations


def eliminate(
    columns: int,
    start: Any,
    column: Any,
    coefficient: Any,
    coefficient_values: Any,
    p: float,
    mode: int,
    stops: Sequence[int] = (),
    reached: Callable[[int], None] | None = None,
) -> tuple[Any, ...]:
    """Eliminate the rows of a system in the given order.

    A kept row is stored as ``x_pivot = sum_e value_e x_column_e``, columns descending.

    Parameters
    ----------
    columns, start, column, coefficient
        The system (int; int64, int32, int32 arrays).
    coefficient_values
        float64 residues of the table's coefficients.
    p
        The prime.
    mode
        `FULL` or `LEADING`.
    stops, reached
        Ascending numbers of rows; `reached` is told how many of them are behind.

    Returns
    -------
    kept
        int32: numbers of the independent rows.
    pivot
        int32: pivot column of each.
    pivot_row
        int32 (columns,): place in `kept` of the row with this pivot, or -1.
    row_start, row_column, row_value
        The stored rows.
    used_start, used
        Places of the rows used in reducing each.
    operations
        Multiply-adds done.
    """
    rows = len(start) - 1
    most = min(rows, columns)
    bottom, middle, top = empty_columns(columns)
    work = np.zeros(columns, np.float64)
    present = np.zeros(columns, np.uint8)
    tail = np.empty(columns, np.int32)
    sources = np.empty(most, np.int32)
    kept = np.empty(most, np.int32)
    pivot = np.empty(most, np.int32)
    pivot_row = np.full(columns, -1, np.int32)
    row_start = np.zeros(most + 1, np.int64)
    used_start = np.zeros(most + 1, np.int64)
    room = max(1024, len(column))
    row_column = np.empty(room, np.int32)
    row_value = np.empty(room, np.float64)
    used = np.empty(room, np.int32)
    state = np.zeros(5, np.int64)
    for number, stop in enumerate((*stops, rows), start=1):
        while state[0] < stop:
            _eliminate_rows(
                start[: stop + 1],
                column,
                coefficient,
                coefficient_values,
                bottom,
                middle,
                top,
                work,
                present,
                tail,
                sources,
                kept,
                pivot,
                pivot_row,
                row_start,
                row_column,
                row_value,
                used_start,
                used,
                state,
                p,
                mode,
            )
            row_column = grown(row_column, int(state[2]))
            row_value = grown(row_value, int(state[2]))
            used = grown(used, int(state[3]))
        if reached is not None and number <= len(stops):
            reached(number)
    rank = int(state[1])
    stored, listed = row_start[rank], used_start[rank]
    return (
        kept[:rank].copy(),
        pivot[:rank].copy(),
        pivot_row,
        row_start[: rank + 1].copy(),
        row_column[:stored].copy(),
        row_value[:stored].copy(),
        used_start[: rank + 1].copy(),
        used[:listed].copy(),
        int(state[4]),
    )
