"""Sparse elimination modulo a prime: one row after the other, the pivot is the largest column."""

from __future__ import annotations

import numpy as np
from numba import njit

from ibpred.kernels.arithmetic import fused, invert, multiply
from ibpred.kernels.columns import empty_columns, insert, largest, remove

FULL = 0
"""Reduce every column of a row by the pivot rows known so far."""
LEADING = 1
"""Reduce a row only until its largest column has no pivot row."""


@njit(cache=True)
def grown_int(array: np.ndarray, used: int, wanted: int) -> np.ndarray:  # type: ignore[type-arg]
    """The array with room for at least `wanted` items."""
    if wanted <= array.shape[0]:
        return array
    larger = np.empty(max(wanted, 2 * array.shape[0]), np.int32)
    larger[:used] = array[:used]
    return larger


@njit(cache=True)
def grown_float(array: np.ndarray, used: int, wanted: int) -> np.ndarray:  # type: ignore[type-arg]
    """The array with room for at least `wanted` items."""
    if wanted <= array.shape[0]:
        return array
    larger = np.empty(max(wanted, 2 * array.shape[0]), np.float64)
    larger[:used] = array[:used]
    return larger


@njit(cache=True)
def eliminate(  # type: ignore[no-untyped-def]
    columns,
    start,
    column,
    coefficient,
    coefficient_values,
    p,
    mode,
):
    """Eliminate the rows of a system in the given order.

    A kept row is stored as ``x_pivot = sum_e value_e x_column_e``, columns descending.

    Parameters
    ----------
    columns, start, column, coefficient
        The system (int64; int64, int32, int32 arrays).
    coefficient_values
        float64 residues of the table's coefficients.
    p
        The prime, as float64.
    mode
        `FULL` or `LEADING`.

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
    inverse_p = 1.0 / p
    half = 0.5 * p
    rows = start.shape[0] - 1
    bottom, middle, top = empty_columns(columns)
    work = np.zeros(columns, np.float64)
    present = np.zeros(columns, np.uint8)
    pivot_row = np.full(columns, -1, np.int32)
    most = min(rows, columns)
    kept = np.empty(most, np.int32)
    pivot = np.empty(most, np.int32)
    row_start = np.zeros(most + 1, np.int64)
    used_start = np.zeros(most + 1, np.int64)
    row_column = np.empty(max(1024, column.shape[0]), np.int32)
    row_value = np.empty(max(1024, column.shape[0]), np.float64)
    used = np.empty(max(1024, column.shape[0]), np.int32)
    tail = np.empty(1024, np.int32)
    rank = 0
    stored = 0
    listed = 0
    operations = 0
    for row in range(rows):
        first = columns
        for e in range(start[row], start[row + 1]):
            c = column[e]
            if e == start[row]:
                first = c
            work[c] = coefficient_values[coefficient[e]]
            present[c] = 1
            insert(bottom, middle, top, c)
        c = largest(bottom, middle, top, first)
        leader = -1
        scale = 0.0
        length = 0
        steps = 0
        while c >= 0:
            value = work[c]
            place = pivot_row[c]
            remove(bottom, middle, top, c)
            present[c] = 0
            if value != 0.0:
                if place >= 0 and (leader < 0 or mode == FULL):
                    used = grown_int(used, listed + steps, listed + steps + 1)
                    used[listed + steps] = place
                    steps += 1
                    begin, end = row_start[place], row_start[place + 1]
                    operations += end - begin
                    for e in range(begin, end):
                        target = row_column[e]
                        y = row_value[e]
                        h = value * y
                        low = fused(value, y, -h)
                        q = np.rint(h * inverse_p)
                        r = fused(-q, p, h) + low
                        if present[target]:
                            r += work[target]
                            if r > half:
                                r -= p
                            elif r < -half:
                                r += p
                            work[target] = r
                        else:
                            work[target] = r
                            present[target] = 1
                            insert(bottom, middle, top, target)
                elif leader < 0:
                    leader = c
                    scale = -invert(value, p)
                else:
                    tail = grown_int(tail, length, length + 1)
                    tail[length] = c
                    length += 1
            c = largest(bottom, middle, top, c)
        if leader < 0:
            continue
        row_column = grown_int(row_column, stored, stored + length)
        row_value = grown_float(row_value, stored, stored + length)
        for i in range(length):
            row_column[stored + i] = tail[i]
            row_value[stored + i] = multiply(work[tail[i]], scale, p, inverse_p)
        stored += length
        listed += steps
        kept[rank] = row
        pivot[rank] = leader
        pivot_row[leader] = rank
        rank += 1
        row_start[rank] = stored
        used_start[rank] = listed
    return (
        kept[:rank].copy(),
        pivot[:rank].copy(),
        pivot_row,
        row_start[: rank + 1].copy(),
        row_column[:stored].copy(),
        row_value[:stored].copy(),
        used_start[: rank + 1].copy(),
        used[:listed].copy(),
        operations,
    )


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
def substitute_back(  # type: ignore[no-untyped-def]
    columns,
    substituted,
    pivot,
    pivot_row,
    row_start,
    row_column,
    row_value,
    p,
):
    """Express the pivots of the marked rows in columns without pivot.

    The marked rows are closed: each pivot column in one of them belongs to a marked row.

    Returns
    -------
    place
        int32 (columns,): number of the solved row of a pivot column, or -1.
    solved_start, solved_column, solved_value
        The solved rows ``x_pivot = sum_e value_e x_column_e``, columns descending.
    """
    inverse_p = 1.0 / p
    half = 0.5 * p
    bottom, middle, top = empty_columns(columns)
    work = np.zeros(columns, np.float64)
    present = np.zeros(columns, np.uint8)
    solved_place = np.full(columns, -1, np.int32)
    count = 0
    for row in range(pivot.shape[0]):
        if substituted[row]:
            count += 1
    solved_start = np.zeros(count + 1, np.int64)
    solved_column = np.empty(max(1024, 2 * count), np.int32)
    solved_value = np.empty(max(1024, 2 * count), np.float64)
    stored = 0
    done = 0
    for leader in range(columns):
        row = pivot_row[leader]
        if row < 0 or not substituted[row]:
            continue
        for e in range(row_start[row], row_start[row + 1]):
            c = row_column[e]
            value = row_value[e]
            inner = solved_place[c]
            if inner < 0:
                begin, end = e, e + 1
            else:
                begin, end = solved_start[inner], solved_start[inner + 1]
            for f in range(begin, end):
                if inner < 0:
                    target = c
                    r = value
                else:
                    target = solved_column[f]
                    r = multiply(value, solved_value[f], p, inverse_p)
                if present[target]:
                    r += work[target]
                    if r > half:
                        r -= p
                    elif r < -half:
                        r += p
                    work[target] = r
                else:
                    work[target] = r
                    present[target] = 1
                    insert(bottom, middle, top, target)
        c = largest(bottom, middle, top, leader)
        while c >= 0:
            remove(bottom, middle, top, c)
            present[c] = 0
            if work[c] != 0.0:
                solved_column = grown_int(solved_column, stored, stored + 1)
                solved_value = grown_float(solved_value, stored, stored + 1)
                solved_column[stored] = c
                solved_value[stored] = work[c]
                stored += 1
            c = largest(bottom, middle, top, c)
        solved_place[leader] = done
        done += 1
        solved_start[done] = stored
    return solved_place, solved_start, solved_column[:stored].copy(), solved_value[:stored].copy()
