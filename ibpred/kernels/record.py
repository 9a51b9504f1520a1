"""Recording of an elimination as a list of numbered values, each an input, a sum of products or an inverse.

Values are numbered by what they are at two sample points (canonical residues): two values that agree at
both are taken as the same rational function. For functions of degree D a false match among n values has
probability below (n D / p)**2 (Schwartz, Zippel), and a finished tape is validated elsewhere anyway.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numba import njit

from ibpred.kernels.arithmetic import invert, multiply
from ibpred.kernels.columns import empty_columns, insert, largest, remove
from ibpred.kernels.lanes import LONGEST_SUM
from ibpred.kernels.memory import pointer

INPUT, SUM, INVERSE = 0, 1, 2
UNIT = -1
"""In place of the left factor of a term: the term is the right factor alone."""

GOOD, UNLUCKY = 0, 1


@njit(cache=True, inline="always")
def canonical(r: float, p: float) -> float:
    """Balanced residue of an integer of size below 1.5 p."""
    half = 0.5 * p
    if r > half:
        return r - p
    if r < -half:
        return r + p
    return r


@njit(cache=True)
def find(first: Any, second: Any, table: Any, mask: Any, value: Any) -> Any:
    """Place in the hash table of this pair of values, or of the free place for it.

    table, value: pointers; `mask` is the table's size, a power of two, less one.
    """
    mixed = np.uint64(np.int64(first)) * np.uint64(0x9E3779B97F4A7C15)
    mixed ^= mixed >> np.uint64(29)
    mixed = (mixed + np.uint64(np.int64(second))) * np.uint64(0xBF58476D1CE4E5B9)
    mixed ^= mixed >> np.uint64(32)
    place = mixed & mask
    while table[place] >= 0:
        node = table[place]
        if value[2 * node] == first and value[2 * node + 1] == second:
            break
        place = (place + np.uint64(1)) & mask
    return np.int64(place)


@njit(cache=True)
def close_sum(  # type: ignore[no-untyped-def]
    first,
    second,
    scale,
    head,
    item_left,
    item_right,
    item_next,
    table,
    mask,
    value,
    kind,
    node_scale,
    node_start,
    left,
    right,
    count,
    p,
):
    """Number of the value ``(first, second)``, a new sum if no value is equal to it.

    The sum is ``scale * sum(left_i * right_i)`` over the linked list that starts at `head`; a long one
    is split into a chain. `count` holds the number of values so far.
    """
    place = find(first, second, table, mask, value)
    if table[place] >= 0:
        return table[place]
    inverse_p = 1.0 / p
    node = count[0]
    at = node_start[node]
    length = 0
    partial_first = 0.0
    partial_second = 0.0
    item = head
    while item >= 0:
        if length == LONGEST_SUM:
            inner = find(partial_first, partial_second, table, mask, value)
            if table[inner] >= 0:
                at = node_start[node]
                previous = table[inner]
            else:
                table[inner] = node
                value[2 * node] = partial_first
                value[2 * node + 1] = partial_second
                kind[node] = SUM
                node_scale[node] = -1
                previous = node
                node += 1
                node_start[node] = at
            left[at] = UNIT
            right[at] = previous
            at += 1
            length = 1
        x, y = item_left[item], item_right[item]
        left[at] = x
        right[at] = y
        at += 1
        length += 1
        if x == UNIT:
            partial_first += value[2 * y]
            partial_second += value[2 * y + 1]
        else:
            partial_first += multiply(value[2 * x], value[2 * y], p, inverse_p)
            partial_second += multiply(value[2 * x + 1], value[2 * y + 1], p, inverse_p)
        partial_first = canonical(partial_first, p)
        partial_second = canonical(partial_second, p)
        item = item_next[item]
    # the chain may have filled the free place found at first
    place = find(first, second, table, mask, value)
    table[place] = node
    value[2 * node] = first
    value[2 * node + 1] = second
    kind[node] = SUM
    node_scale[node] = scale
    node_start[node + 1] = at
    count[0] = node + 1
    return node


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
                x0, x1 = value[2 * node], value[2 * node + 1]
                x_is_one = x0 == 1.0 and x1 == 1.0
                place = pivot_row[c]
                for e in range(row_start[place], row_start[place + 1]):
                    target = row_column[e]
                    other = row_node[e]
                    y0, y1 = value[2 * other], value[2 * other + 1]
                    if x_is_one:
                        item_left[items] = UNIT
                        item_right[items] = other
                    elif y0 == 1.0 and y1 == 1.0:
                        item_left[items] = UNIT
                        item_right[items] = node
                    else:
                        item_left[items] = node
                        item_right[items] = other
                    r0 = multiply(x0, y0, p, inverse_p)
                    r1 = multiply(x1, y1, p, inverse_p)
                    if present[target]:
                        r0 += work[2 * target]
                        r1 += work[2 * target + 1]
                        item_next[items] = head[target]
                    else:
                        present[target] = 1
                        insert(bottom, middle, top, target)
                        item_next[items] = -1
                    work[2 * target] = canonical(r0, p)
                    work[2 * target + 1] = canonical(r1, p)
                    head[target] = items
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
            x0, x1 = value[2 * node], value[2 * node + 1]
            inner = solved_place[c]
            begin, end = e, e + 1
            if inner >= 0:
                begin, end = solved_start[inner], solved_start[inner + 1]
            for f in range(begin, end):
                target = c
                item_left[items] = UNIT
                item_right[items] = node
                r0, r1 = x0, x1
                if inner >= 0:
                    target = solved_column[f]
                    other = solved_node[f]
                    y0, y1 = value[2 * other], value[2 * other + 1]
                    r0 = multiply(x0, y0, p, inverse_p)
                    r1 = multiply(x1, y1, p, inverse_p)
                    if x0 == 1.0 and x1 == 1.0:
                        item_right[items] = other
                    elif y0 != 1.0 or y1 != 1.0:
                        item_left[items] = node
                        item_right[items] = other
                if present[target]:
                    r0 += work[2 * target]
                    r1 += work[2 * target + 1]
                    item_next[items] = head[target]
                else:
                    present[target] = 1
                    insert(bottom, middle, top, target)
                    item_next[items] = -1
                work[2 * target] = canonical(r0, p)
                work[2 * target + 1] = canonical(r1, p)
                head[target] = items
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


@dataclass(frozen=True)
class Recorded:
    """Numbered values.

    Attributes
    ----------
    lucky
        False if some value vanishes at one of the two points only.
    kind
        uint8: `INPUT`, `SUM` or `INVERSE` (minus one over the value `scale`).
    scale
        int32: number of the factor of a sum, or -1; number of the value inverted.
    start, left, right
        Terms of the sums in CSR form; `left` may be `UNIT`.
    solved_place
        int32 (columns,): number of the solved row of a pivot column, or -1.
    solved_start, solved_column, solved_node
        Solved rows: columns without pivot, descending, and the number of each coefficient.
    """

    lucky: bool
    kind: Any
    scale: Any
    start: Any
    left: Any
    right: Any
    solved_place: Any
    solved_start: Any
    solved_column: Any
    solved_node: Any


@dataclass(frozen=True)
class Bounds:
    """Bounds on what a recording needs, known from an elimination of the same rows.

    Attributes
    ----------
    values, terms
        Numbered values, terms in all of them.
    items
        Terms met in one row.
    entries, solved
        Entries of all stored rows, of all solved rows.
    """

    values: int
    terms: int
    items: int
    entries: int
    solved: int


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
