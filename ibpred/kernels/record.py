"""Recording of an elimination: every value it forms, numbered, and how it is formed."""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from ibpred.kernels.arithmetic import invert, multiply
from ibpred.kernels.columns import empty_columns, insert, largest, remove
from ibpred.kernels.memory import pointer
from ibpred.kernels.numbering import INPUT, INVERSE, UNIT, Bounds, Recorded, canonical, close_sum, find
from ibpred.kernels.rowsum import accumulate_product

GOOD, UNLUCKY = 0, 1


@njit(cache=True)
def _record_rows(  # type: ignore[no-untyped-def]
    start_array,
    column_array,
    coefficient_array,
    inputs_array,
    substituted_pivots_array,
    bottom_array,
    middle_array,
    top_array,
    work_array,
    head_array,
    present_array,
    item_left_array,
    item_right_array,
    item_next_array,
    value_array,
    kind_array,
    scale_array,
    node_start_array,
    left_array,
    right_array,
    count_array,
    table_array,
    named_array,
    pivot_row_array,
    row_start_array,
    row_column_array,
    row_node_array,
    solved_place_array,
    solved_start_array,
    solved_column_array,
    solved_node_array,
    p,
):
    """Fill the arrays; returns the status."""
    start = pointer(start_array)
    column = pointer(column_array)
    coefficient = pointer(coefficient_array)
    inputs = pointer(inputs_array)
    substituted_pivots = pointer(substituted_pivots_array)
    bottom = pointer(bottom_array)
    middle = pointer(middle_array)
    top = pointer(top_array)
    work = pointer(work_array)
    head = pointer(head_array)
    present = pointer(present_array)
    item_left = pointer(item_left_array)
    item_right = pointer(item_right_array)
    item_next = pointer(item_next_array)
    value = pointer(value_array)
    kind = pointer(kind_array)
    scale = pointer(scale_array)
    node_start = pointer(node_start_array)
    left = pointer(left_array)
    right = pointer(right_array)
    count = pointer(count_array)
    table = pointer(table_array)
    named = pointer(named_array)
    pivot_row = pointer(pivot_row_array)
    row_start = pointer(row_start_array)
    row_column = pointer(row_column_array)
    row_node = pointer(row_node_array)
    solved_place = pointer(solved_place_array)
    solved_start = pointer(solved_start_array)
    solved_column = pointer(solved_column_array)
    solved_node = pointer(solved_node_array)
    columns = pivot_row_array.shape[0]
    rows = start_array.shape[0] - 1
    mask = np.uint64(table_array.shape[0] - 1)
    inverse_p = 1.0 / p
    for c in range(named_array.shape[0]):
        first, second = inputs[2 * c], inputs[2 * c + 1]
        node = count[0]
        place = find(first, second, table, mask, value)
        kind[node] = INPUT
        value[2 * node] = first
        value[2 * node + 1] = second
        node_start[node + 1] = 0
        count[0] = node + 1
        if table[place] < 0:
            table[place] = node
        named[c] = table[place]
    stored = 0
    status = GOOD

    for row in range(rows):
        items = 0
        c = -1
        for e in range(start[row], start[row + 1]):
            target = column[e]
            if e == start[row]:
                c = target + np.int64(0)
            node = named[coefficient[e]]
            item_left[items] = UNIT
            item_right[items] = node
            item_next[items] = -1
            head[target] = items
            items += 1
            work[2 * target] = value[2 * node]
            work[2 * target + 1] = value[2 * node + 1]
            present[target] = 1
            insert(bottom, middle, top, target)
        c = largest(bottom, middle, top, c)
        leader = -1
        factor = -1
        while c >= 0:
            first, second = work[2 * c], work[2 * c + 1]
            remove(bottom, middle, top, c)
            present[c] = 0
            if first == 0.0 or second == 0.0:
                if first != second:
                    status = UNLUCKY
            elif leader < 0 and pivot_row[c] >= 0:
                node = close_sum(
                    first, second, -1, head[c], item_left, item_right, item_next,
                    table, mask, value, kind, scale, node_start, left, right, count, p,
                )  # fmt: skip
                place = pivot_row[c]
                for e in range(row_start[place], row_start[place + 1]):
                    accumulate_product(
                        work, present, head, bottom, middle, top, item_left, item_right, item_next, value,
                        items, row_column[e], node, row_node[e], p, inverse_p,
                    )  # fmt: skip
                    items += 1
            elif leader < 0:
                leader = c
                node = close_sum(
                    first, second, -1, head[c], item_left, item_right, item_next,
                    table, mask, value, kind, scale, node_start, left, right, count, p,
                )  # fmt: skip
                first, second = -invert(first, p), -invert(second, p)
                place = find(first, second, table, mask, value)
                if table[place] < 0:
                    inverse = count[0]
                    table[place] = inverse
                    kind[inverse] = INVERSE
                    scale[inverse] = node
                    value[2 * inverse] = first
                    value[2 * inverse + 1] = second
                    node_start[inverse + 1] = node_start[inverse]
                    count[0] = inverse + 1
                factor = table[place]
            else:
                f0, f1 = value[2 * factor], value[2 * factor + 1]
                given = factor
                if f0 == 1.0 and f1 == 1.0:
                    given = -1
                node = close_sum(
                    canonical(multiply(first, f0, p, inverse_p), p),
                    canonical(multiply(second, f1, p, inverse_p), p),
                    given, head[c], item_left, item_right, item_next,
                    table, mask, value, kind, scale, node_start, left, right, count, p,
                )  # fmt: skip
                row_column[stored] = c
                row_node[stored] = node
                stored += 1
            c = largest(bottom, middle, top, c)
        if leader >= 0:
            pivot_row[leader] = row
        row_start[row + 1] = stored

    solved = 0
    done = 0
    for leader in range(columns):
        row = pivot_row[leader]
        if row < 0 or not substituted_pivots[leader]:
            continue
        items = 0
        for e in range(row_start[row], row_start[row + 1]):
            c = row_column[e]
            node = row_node[e]
            inner = solved_place[c]
            begin, end = e, e + 1
            if inner >= 0:
                begin, end = solved_start[inner], solved_start[inner + 1]
            for f in range(begin, end):
                target, other = c, UNIT
                if inner >= 0:
                    target, other = solved_column[f], solved_node[f]
                accumulate_product(
                    work, present, head, bottom, middle, top, item_left, item_right, item_next, value,
                    items, target, node, other, p, inverse_p,
                )  # fmt: skip
                items += 1
        c = largest(bottom, middle, top, leader)
        while c >= 0:
            first, second = work[2 * c], work[2 * c + 1]
            remove(bottom, middle, top, c)
            present[c] = 0
            if first == 0.0 or second == 0.0:
                if first != second:
                    status = UNLUCKY
            else:
                solved_column[solved] = c
                solved_node[solved] = close_sum(
                    first, second, -1, head[c], item_left, item_right, item_next,
                    table, mask, value, kind, scale, node_start, left, right, count, p,
                )  # fmt: skip
                solved += 1
            c = largest(bottom, middle, top, c)
        solved_place[leader] = done
        done += 1
        solved_start[done] = solved
    return status


def record_elimination(
    columns: int,
    start: Any,
    column: Any,
    coefficient: Any,
    inputs: Any,
    substituted_pivots: Any,
    bounds: Bounds,
    p: float,
) -> Recorded:
    """Run the leading-only elimination and the back substitution, recording every value.

    Parameters
    ----------
    columns, start, column, coefficient
        A system whose rows are independent.
    inputs
        float64 (coefficients, 2): canonical balanced residues of the coefficients at two points.
    substituted_pivots
        uint8 (columns,): pivots whose back substitution is wanted.
    bounds
        Room to be made.
    p
        The prime.
    """
    rows = len(start) - 1
    size = 16
    while size < 2 * bounds.values + 2:
        size *= 2
    kind = np.empty(bounds.values + 1, np.uint8)
    scale = np.full(bounds.values + 1, -1, np.int32)
    node_start = np.zeros(bounds.values + 2, np.int64)
    left = np.empty(bounds.terms + 1, np.int32)
    right = np.empty(bounds.terms + 1, np.int32)
    count = np.zeros(1, np.int64)
    solved_place = np.full(columns, -1, np.int32)
    solved_start = np.zeros(rows + 1, np.int64)
    solved_column = np.empty(bounds.solved, np.int32)
    solved_node = np.empty(bounds.solved, np.int32)
    status = _record_rows(
        start,
        column,
        coefficient,
        inputs.reshape(-1),
        substituted_pivots,
        *empty_columns(columns),
        np.zeros(2 * columns, np.float64),
        np.full(columns, -1, np.int32),
        np.zeros(columns, np.uint8),
        np.empty(bounds.items, np.int32),
        np.empty(bounds.items, np.int32),
        np.empty(bounds.items, np.int32),
        np.empty(2 * bounds.values + 2, np.float64),
        kind,
        scale,
        node_start,
        left,
        right,
        count,
        np.full(size, -1, np.int32),
        np.empty(len(inputs), np.int32),
        np.full(columns, -1, np.int32),
        np.zeros(rows + 1, np.int64),
        np.empty(bounds.entries, np.int32),
        np.empty(bounds.entries, np.int32),
        solved_place,
        solved_start,
        solved_column,
        solved_node,
        p,
    )
    values = int(count[0])
    terms = int(node_start[values])
    return Recorded(
        status == GOOD,
        kind[:values],
        scale[:values],
        node_start[: values + 1],
        left[:terms],
        right[:terms],
        solved_place,
        solved_start,
        solved_column,
        solved_node,
    )
