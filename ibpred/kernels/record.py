"""Recording of an elimination as a list of numbered values, each an input, a sum of products or an inverse.

Values are numbered by what they are at two sample points (canonical residues): two values that agree at
both are taken as the same rational function. For functions of degree D a false match among n values has
probability below (n D / p)**2 (Schwartz, Zippel), and a finished tape is validated elsewhere anyway.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from ibpred.kernels.arithmetic import invert, multiply
from ibpred.kernels.columns import empty_columns, insert, largest, remove
from ibpred.kernels.lanes import LONGEST_SUM

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
def find(first: float, second: float, table: Any, value: Any) -> Any:
    """Place in the hash table of this pair of values, or of the free place for it."""
    mask = np.uint64(table.shape[0] - 1)
    mixed = np.uint64(np.int64(first)) * np.uint64(0x9E3779B97F4A7C15)
    mixed ^= mixed >> np.uint64(29)
    mixed = (mixed + np.uint64(np.int64(second))) * np.uint64(0xBF58476D1CE4E5B9)
    mixed ^= mixed >> np.uint64(32)
    place = mixed & mask
    while table[place] >= 0:
        node = table[place]
        if value[node, 0] == first and value[node, 1] == second:
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
    place = find(first, second, table, value)
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
            inner = find(partial_first, partial_second, table, value)
            if table[inner] >= 0:
                at = node_start[node]
                previous = table[inner]
            else:
                table[inner] = node
                value[node, 0] = partial_first
                value[node, 1] = partial_second
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
            partial_first += value[y, 0]
            partial_second += value[y, 1]
        else:
            partial_first += multiply(value[x, 0], value[y, 0], p, inverse_p)
            partial_second += multiply(value[x, 1], value[y, 1], p, inverse_p)
        partial_first = canonical(partial_first, p)
        partial_second = canonical(partial_second, p)
        item = item_next[item]
    # the chain may have filled the free place found at first
    place = find(first, second, table, value)
    table[place] = node
    value[node, 0] = first
    value[node, 1] = second
    kind[node] = SUM
    node_scale[node] = scale
    node_start[node + 1] = at
    count[0] = node + 1
    return node


@njit(cache=True)
def record_elimination(  # type: ignore[no-untyped-def]
    columns,
    start,
    column,
    coefficient,
    inputs,
    substituted_pivots,
    most_nodes,
    most_terms,
    most_items,
    most_cells,
    most_solved,
    p,
):
    """Run the leading-only elimination and the back substitution, recording every value.

    Parameters
    ----------
    columns, start, column, coefficient
        A system whose rows are independent.
    inputs
        float64 (coefficients, 2): canonical residues of the coefficients at two points.
    substituted_pivots
        uint8 (columns,): pivots whose back substitution is wanted.
    most_nodes, most_terms, most_items, most_cells, most_solved
        Bounds on the numbers of values, of terms, of terms of one row, of stored entries of all rows, of
        entries of all solved rows.
    p
        The prime.

    Returns
    -------
    status
        `GOOD`, or `UNLUCKY` if a value vanishes at one point only.
    value, kind, scale, node_start, left, right
        The values: what they are at the points; `INPUT`, `SUM` or `INVERSE` (minus one over the value
        `scale`); number of the factor of a sum or -1; terms in CSR form.
    solved_place, solved_start, solved_column, solved_node
        Solved rows of the wanted back substitution.
    """
    inverse_p = 1.0 / p
    bottom, middle, top = empty_columns(columns)
    work = np.zeros((columns, 2), np.float64)
    head = np.full(columns, -1, np.int32)
    present = np.zeros(columns, np.uint8)
    item_left = np.empty(most_items, np.int32)
    item_right = np.empty(most_items, np.int32)
    item_next = np.empty(most_items, np.int32)

    value = np.empty((most_nodes + 1, 2), np.float64)
    kind = np.empty(most_nodes + 1, np.uint8)
    scale = np.full(most_nodes + 1, -1, np.int32)
    node_start = np.zeros(most_nodes + 2, np.int64)
    left = np.empty(most_terms + 1, np.int32)
    right = np.empty(most_terms + 1, np.int32)
    size = 16
    while size < 2 * most_nodes + 2:
        size *= 2
    table = np.full(size, -1, np.int32)
    count = np.zeros(1, np.int64)

    named = np.empty(inputs.shape[0], np.int32)
    for c in range(inputs.shape[0]):
        node = count[0]
        place = find(inputs[c, 0], inputs[c, 1], table, value)
        kind[node] = INPUT
        value[node, 0] = inputs[c, 0]
        value[node, 1] = inputs[c, 1]
        node_start[node + 1] = 0
        count[0] = node + 1
        if table[place] < 0:
            table[place] = node
        named[c] = table[place]

    rows = start.shape[0] - 1
    pivot_row = np.full(columns, -1, np.int32)
    row_start = np.zeros(rows + 1, np.int64)
    row_column = np.empty(most_cells, np.int32)
    row_node = np.empty(most_cells, np.int32)
    stored = 0
    status = GOOD
    solved_place = np.full(columns, -1, np.int32)
    solved_start = np.zeros(rows + 1, np.int64)
    solved_column = np.empty(most_solved, np.int32)
    solved_node = np.empty(most_solved, np.int32)

    for row in range(rows):
        items = 0
        c = -1
        for e in range(start[row], start[row + 1]):
            target = column[e]
            if e == start[row]:
                c = target
            node = named[coefficient[e]]
            item_left[items] = UNIT
            item_right[items] = node
            item_next[items] = -1
            head[target] = items
            items += 1
            work[target, 0] = value[node, 0]
            work[target, 1] = value[node, 1]
            present[target] = 1
            insert(bottom, middle, top, target)
        c = largest(bottom, middle, top, c)
        leader = -1
        factor = -1
        while c >= 0:
            first, second = work[c, 0], work[c, 1]
            remove(bottom, middle, top, c)
            present[c] = 0
            if first == 0.0 or second == 0.0:
                if first != second:
                    status = UNLUCKY
            elif leader < 0 and pivot_row[c] >= 0:
                node = close_sum(
                    first, second, -1, head[c], item_left, item_right, item_next,
                    table, value, kind, scale, node_start, left, right, count, p,
                )  # fmt: skip
                x0, x1 = value[node, 0], value[node, 1]
                x_is_one = x0 == 1.0 and x1 == 1.0
                place = pivot_row[c]
                for e in range(row_start[place], row_start[place + 1]):
                    target = row_column[e]
                    other = row_node[e]
                    y0, y1 = value[other, 0], value[other, 1]
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
                        r0 += work[target, 0]
                        r1 += work[target, 1]
                        item_next[items] = head[target]
                    else:
                        present[target] = 1
                        insert(bottom, middle, top, target)
                        item_next[items] = -1
                    work[target, 0] = canonical(r0, p)
                    work[target, 1] = canonical(r1, p)
                    head[target] = items
                    items += 1
            elif leader < 0:
                leader = c
                node = close_sum(
                    first, second, -1, head[c], item_left, item_right, item_next,
                    table, value, kind, scale, node_start, left, right, count, p,
                )  # fmt: skip
                first, second = -invert(first, p), -invert(second, p)
                place = find(first, second, table, value)
                if table[place] < 0:
                    inverse = count[0]
                    table[place] = inverse
                    kind[inverse] = INVERSE
                    scale[inverse] = node
                    value[inverse, 0] = first
                    value[inverse, 1] = second
                    node_start[inverse + 1] = node_start[inverse]
                    count[0] = inverse + 1
                factor = table[place]
            else:
                f0, f1 = value[factor, 0], value[factor, 1]
                given = factor
                if f0 == 1.0 and f1 == 1.0:
                    given = -1
                node = close_sum(
                    canonical(multiply(first, f0, p, inverse_p), p),
                    canonical(multiply(second, f1, p, inverse_p), p),
                    given, head[c], item_left, item_right, item_next,
                    table, value, kind, scale, node_start, left, right, count, p,
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
            x0, x1 = value[node, 0], value[node, 1]
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
                    y0, y1 = value[other, 0], value[other, 1]
                    r0 = multiply(x0, y0, p, inverse_p)
                    r1 = multiply(x1, y1, p, inverse_p)
                    if x0 == 1.0 and x1 == 1.0:
                        item_right[items] = other
                    elif y0 != 1.0 or y1 != 1.0:
                        item_left[items] = node
                        item_right[items] = other
                if present[target]:
                    r0 += work[target, 0]
                    r1 += work[target, 1]
                    item_next[items] = head[target]
                else:
                    present[target] = 1
                    insert(bottom, middle, top, target)
                    item_next[items] = -1
                work[target, 0] = canonical(r0, p)
                work[target, 1] = canonical(r1, p)
                head[target] = items
                items += 1
        c = largest(bottom, middle, top, leader)
        while c >= 0:
            first, second = work[c, 0], work[c, 1]
            remove(bottom, middle, top, c)
            present[c] = 0
            if first == 0.0 or second == 0.0:
                if first != second:
                    status = UNLUCKY
            else:
                solved_column[solved] = c
                solved_node[solved] = close_sum(
                    first, second, -1, head[c], item_left, item_right, item_next,
                    table, value, kind, scale, node_start, left, right, count, p,
                )  # fmt: skip
                solved += 1
            c = largest(bottom, middle, top, c)
        solved_place[leader] = done
        done += 1
        solved_start[done] = solved
    nodes = count[0]
    terms = node_start[nodes]
    return (
        status,
        value[:nodes],
        kind[:nodes],
        scale[:nodes],
        node_start[: nodes + 1],
        left[:terms],
        right[:terms],
        solved_place,
        solved_start[: done + 1],
        solved_column[:solved],
        solved_node[:solved],
    )
