"""Tracing back and back substitution in an eliminated system modulo a prime."""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from ibpred.kernels.arithmetic import multiply
from ibpred.kernels.columns import empty_columns, largest, remove
from ibpred.kernels.memory import grown, pointer
from ibpred.kernels.rowsum import accumulate


@njit(cache=True)
def needed_rows(  # type: ignore[no-untyped-def]
    wanted,
    pivot,
    pivot_row,
    row_start,
    row_column,
    used_start,
    used,
):
    """Rows from which the wanted columns follow.

    Returns
    -------
    substituted
        uint8 (kept rows,): rows that take part in the back substitution of the wanted columns.
    needed
        uint8 (kept rows,): these and the rows used in deriving them.
    """
    rank = pivot.shape[0]
    substituted = np.zeros(rank, np.uint8)
    needed = np.zeros(rank, np.uint8)
    stack = np.empty(rank + wanted.shape[0] + 1, np.int32)
    height = 0
    for i in range(wanted.shape[0]):
        place = pivot_row[wanted[i]]
        if place >= 0 and not substituted[place]:
            substituted[place] = 1
            stack[height] = place
            height += 1
    while height > 0:
        height -= 1
        place = stack[height]
        for e in range(row_start[place], row_start[place + 1]):
            other = pivot_row[row_column[e]]
            if other >= 0 and not substituted[other]:
                substituted[other] = 1
                stack[height] = other
                height += 1
    # a row uses only rows kept before it
    for place in range(rank - 1, -1, -1):
        if substituted[place]:
            needed[place] = 1
        if needed[place]:
            for e in range(used_start[place], used_start[place + 1]):
                needed[used[e]] = 1
    return substituted, needed


@njit(cache=True)
def _substitute_rows(  # type: ignore[no-untyped-def]
    substituted_array,
    pivot_row_array,
    row_start_array,
    row_column_array,
    row_value_array,
    bottom_array,
    middle_array,
    top_array,
    work_array,
    present_array,
    place_array,
    solved_start_array,
    solved_column_array,
    solved_value_array,
    state,
    p,
):
    """Back substitution from pivot column ``state[0]`` on, as long as the storage lasts.

    state: next column, solved rows, room wanted.
    """
    substituted = pointer(substituted_array)
    pivot_row = pointer(pivot_row_array)
    row_start = pointer(row_start_array)
    row_column = pointer(row_column_array)
    row_value = pointer(row_value_array)
    bottom = pointer(bottom_array)
    middle = pointer(middle_array)
    top = pointer(top_array)
    work = pointer(work_array)
    present = pointer(present_array)
    place = pointer(place_array)
    solved_start = pointer(solved_start_array)
    solved_column = pointer(solved_column_array)
    solved_value = pointer(solved_value_array)
    room = solved_column_array.shape[0]
    inverse_p = 1.0 / p
    half = 0.5 * p
    done = state[1]
    stored = solved_start[done]
    for leader in range(state[0], pivot_row_array.shape[0]):
        row = pivot_row[leader]
        if row < 0 or not substituted[row]:
            continue
        size = 0
        for e in range(row_start[row], row_start[row + 1]):
            c = row_column[e]
            value = row_value[e]
            inner = place[c]
            begin, end = e, e + 1
            if inner >= 0:
                begin, end = solved_start[inner], solved_start[inner + 1]
            for f in range(begin, end):
                target = c
                r = value
                if inner >= 0:
                    target = solved_column[f]
                    r = multiply(value, solved_value[f], p, inverse_p)
                size += accumulate(work, present, bottom, middle, top, target, r, p, half)
        wanted = stored + size
        column = largest(bottom, middle, top, leader)
        while column >= 0:
            remove(bottom, middle, top, column)
            present[column] = 0
            if work[column] != 0.0 and wanted <= room:
                solved_column[stored] = column
                solved_value[stored] = work[column]
                stored += 1
            column = largest(bottom, middle, top, column)
        if wanted > room:
            state[0], state[1], state[2] = leader, done, wanted
            return
        place[leader] = done
        done += 1
        solved_start[done] = stored
    state[0], state[1] = pivot_row_array.shape[0], done


def substitute_back(
    columns: int,
    substituted: Any,
    pivot_row: Any,
    row_start: Any,
    row_column: Any,
    row_value: Any,
    p: float,
) -> tuple[Any, Any, Any, Any]:
    """Express the pivots of the marked rows in columns without pivot.

    The marked rows are closed: each pivot column in one of them belongs to a marked row.

    Parameters
    ----------
    columns
        Number of columns.
    substituted
        uint8 per kept row: the marks, as `needed_rows` gives them.
    pivot_row, row_start, row_column, row_value
        Kept rows, as `eliminate` gives them.
    p
        The prime.

    Returns
    -------
    place
        int32 (columns,): number of the solved row of a pivot column, or -1.
    solved_start, solved_column, solved_value
        The solved rows ``x_pivot = sum_e value_e x_column_e``, columns descending.
    """
    bottom, middle, top = empty_columns(columns)
    work = np.zeros(columns, np.float64)
    present = np.zeros(columns, np.uint8)
    place = np.full(columns, -1, np.int32)
    count = int(np.count_nonzero(substituted))
    solved_start = np.zeros(count + 1, np.int64)
    room = max(1024, 8 * count)
    solved_column = np.empty(room, np.int32)
    solved_value = np.empty(room, np.float64)
    state = np.zeros(3, np.int64)
    while state[0] < columns:
        _substitute_rows(
            substituted,
            pivot_row,
            row_start,
            row_column,
            row_value,
            bottom,
            middle,
            top,
            work,
            present,
            place,
            solved_start,
            solved_column,
            solved_value,
            state,
            p,
        )
        solved_column = grown(solved_column, int(state[2]))
        solved_value = grown(solved_value, int(state[2]))
    stored = solved_start[count]
    return place, solved_start, solved_column[:stored].copy(), solved_value[:stored].copy()
