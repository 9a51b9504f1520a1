"""Gathering equations: numbering of 64-bit codes in the order in which they are met, sorted sparse rows."""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

_FREE = -1
_SHORT = 48  # rows up to this length are sorted by insertion
_MIX = np.uint64(0x9E3779B97F4A7C15)


@njit(cache=True)
def _number(codes, ids, keys, places, distinct, state):  # type: ignore[no-untyped-def]
    """Number codes from ``state[0]`` on until the table is half full; state: next code, distinct codes."""
    size = keys.shape[0]
    mask = size - 1
    shift = np.uint64(64)
    while size > 1:
        size >>= 1
        shift -= np.uint64(1)
    room = min(distinct.shape[0], keys.shape[0] // 2)
    count = state[1]
    for e in range(state[0], codes.shape[0]):
        code = codes[e]
        slot = np.int64((np.uint64(code) * _MIX) >> shift)
        while places[slot] != _FREE and keys[slot] != code:
            slot = (slot + 1) & mask
        if places[slot] == _FREE:
            if count >= room:
                state[0], state[1] = e, count
                return
            places[slot] = count
            keys[slot] = code
            distinct[count] = code
            count += 1
        ids[e] = places[slot]
    state[0], state[1] = codes.shape[0], count


class Numbering:
    """Numbers codes 0, 1, 2, ... in the order in which they are met.

    Grows; lives while one system is built.
    """

    def __init__(self) -> None:
        self._resize(12)
        self._distinct = np.empty(0, np.int64)
        self._count = 0

    def _resize(self, bits: int) -> None:
        self._bits = bits
        self._keys = np.empty(1 << bits, np.int64)
        self._places = np.full(1 << bits, _FREE, np.int32)

    def __len__(self) -> int:
        return self._count

    @property
    def codes(self) -> Any:
        """int64: the codes met so far."""
        return self._distinct[: self._count]

    def numbers(self, codes: Any) -> Any:
        """int32: the numbers of an int64 array of codes; new ones get the next numbers."""
        ids = np.empty(len(codes), np.int32)
        codes = np.ascontiguousarray(codes, np.int64)
        state = np.array([0, self._count], np.int64)
        while True:
            _number(codes, ids, self._keys, self._places, self._distinct, state)
            self._count = int(state[1])
            if state[0] == len(codes):
                return ids
            if 2 * self._count >= len(self._keys):
                self._grow()
            if self._count == len(self._distinct):
                larger = np.empty(max(1024, self._count + self._count // 2), np.int64)
                larger[: self._count] = self.codes
                self._distinct = larger

    def _grow(self) -> None:
        known = self.codes.copy()
        self._resize(self._bits + 2)
        ids = np.empty(len(known), np.int32)
        _number(known, ids, self._keys, self._places, np.empty_like(known), np.zeros(2, np.int64))


@njit(cache=True)
def count_entries(row, number, column, place, counts, occurs):  # type: ignore[no-untyped-def]
    """Add the entries with a column to the counts of their rows.

    Parameters
    ----------
    row, number
        int32: row and number of each entry.
    column
        int32: negative for numbers that have none.
    place
        int64: where each row comes.
    counts
        int64: by place; changed.
    occurs
        bool: by number; set for those met with a column.
    """
    for e in range(row.shape[0]):
        if column[number[e]] >= 0:
            counts[place[row[e]]] += 1
            occurs[number[e]] = True


@njit(cache=True)
def scatter_entries(  # type: ignore[no-untyped-def]
    row, number, coefficient, column, place, following, columns, coefficients
):
    """Write entries into their rows.

    Parameters
    ----------
    row, number, coefficient
        int32: the entries.
    column, place
        As for `count_entries`.
    following
        int64: by place, where its next entry goes; changed.
    columns, coefficients
        int32: what is filled.
    """
    for e in range(row.shape[0]):
        c = column[number[e]]
        if c >= 0:
            at = following[place[row[e]]]
            following[place[row[e]]] = at + 1
            columns[at] = c
            coefficients[at] = coefficient[e]


@njit(cache=True)
def sort_rows(start, columns, coefficients):  # type: ignore[no-untyped-def]
    """Sort the entries of every row by falling column."""
    for r in range(start.shape[0] - 1):
        begin, end = start[r], start[r + 1]
        if end - begin > _SHORT:
            order = np.argsort(columns[begin:end])[::-1]
            columns[begin:end] = columns[begin:end][order]
            coefficients[begin:end] = coefficients[begin:end][order]
            continue
        for i in range(begin + 1, end):
            c, value = columns[i], coefficients[i]
            j = i
            while j > begin and columns[j - 1] < c:
                columns[j] = columns[j - 1]
                coefficients[j] = coefficients[j - 1]
                j -= 1
            columns[j] = c
            coefficients[j] = value
