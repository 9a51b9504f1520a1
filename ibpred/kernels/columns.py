"""A set of column numbers that gives its largest member: bits in three levels of 64-bit words.

`insert`, `remove` and `largest` take pointers to the levels.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from ibpred.kernels.arithmetic import leading_zeros

ONE = np.uint64(1)
ZERO = np.uint64(0)


def empty_columns(columns: int) -> tuple[Any, Any, Any]:
    """An empty set of columns ``0 .. columns - 1``."""
    bottom = np.zeros((columns >> 6) + 1, np.uint64)
    middle = np.zeros((columns >> 12) + 1, np.uint64)
    top = np.zeros((columns >> 18) + 1, np.uint64)
    return bottom, middle, top


@njit(cache=True)
def insert(bottom: Any, middle: Any, top: Any, column: Any) -> None:
    """Add a column that is not in the set."""
    c = np.uint64(column)
    six, mask = np.uint64(6), np.uint64(63)
    word = c >> six
    if bottom[word] == ZERO:
        upper = word >> six
        if middle[upper] == ZERO:
            top[upper >> six] |= ONE << (upper & mask)
        middle[upper] |= ONE << (word & mask)
    bottom[word] |= ONE << (c & mask)


@njit(cache=True)
def remove(bottom: Any, middle: Any, top: Any, column: Any) -> None:
    """Take away a column that is in the set."""
    c = np.uint64(column)
    six, mask = np.uint64(6), np.uint64(63)
    word = c >> six
    bottom[word] ^= ONE << (c & mask)
    if bottom[word] == ZERO:
        upper = word >> six
        middle[upper] ^= ONE << (word & mask)
        if middle[upper] == ZERO:
            top[upper >> six] ^= ONE << (upper & mask)


@njit(cache=True)
def largest(bottom: Any, middle: Any, top: Any, below: Any) -> Any:
    """The largest column, -1 for the empty set; no member may exceed `below`."""
    word = np.int64(below) >> 18
    while word >= 0 and top[word] == ZERO:
        word -= 1
    if word < 0:
        return -1
    upper = (word << 6) | (63 - leading_zeros(top[word]))
    lower = (upper << 6) | (63 - leading_zeros(middle[upper]))
    return (lower << 6) | (63 - leading_zeros(bottom[lower]))
