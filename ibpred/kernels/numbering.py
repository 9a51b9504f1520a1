"""Numbering of values: inputs, sums of products and inverses, each known by what it is at two points.

Two values whose canonical residues agree at both points are taken as the same rational function. For
functions of degree D a false match among n values has probability below (n D / p)**2 (Schwartz, Zippel),
and a finished tape is validated elsewhere anyway.

Arrays of values are passed as pointers; a value's two residues are neighbours.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numba import njit

from ibpred.kernels.arithmetic import multiply
from ibpred.kernels.lanes import LONGEST_SUM

INPUT, SUM, INVERSE = 0, 1, 2
UNIT = -1
"""In place of the left factor of a term: the term is the right factor alone."""


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


@njit(cache=True)
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
