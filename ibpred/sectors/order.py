"""Sectors and the one total order on integrals.

A sector is the set of lines with positive power, held as a bit mask: bit i is set if and only if the
power of line i is positive. Integrals are compared by the key of `sort_key`; the smaller key is the
simpler integral. Everything that ranks integrals (columns of linear systems, choice of masters,
representatives of equivalent sectors) uses this order and no other.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

MAX_LINES = 62
"""Sector ids fit a signed 64-bit integer up to this many lines."""


def sector_of(powers: Sequence[int]) -> int:
    """Sector id of an integral: bit i is set where power i is positive."""
    return sum(1 << i for i, power in enumerate(powers) if power > 0)


def lines_of(sector: int) -> tuple[int, ...]:
    """Lines of a sector, ascending."""
    return tuple(i for i in range(sector.bit_length()) if sector >> i & 1)


def sector_from_lines(lines: Sequence[int]) -> int:
    """Sector id of a set of lines."""
    return sum(1 << i for i in set(lines))


def dots(powers: Sequence[int]) -> int:
    """Sum of ``power - 1`` over the positive powers."""
    return sum(power - 1 for power in powers if power > 0)


def rank(powers: Sequence[int]) -> int:
    """Sum of ``-power`` over the negative powers."""
    return -sum(power for power in powers if power < 0)


def sector_key(sector: int) -> tuple[int, int]:
    """Key of the order on sectors: number of lines, then sector id."""
    return sector.bit_count(), sector


def sort_key(powers: Sequence[int]) -> tuple[int, ...]:
    """Key of the total order on integrals; smaller is simpler.

    Number of lines, sector id, dots, rank, then the powers themselves in lexicographic order. Dots
    come before rank, so that masters carry numerators rather than dots.
    """
    sector = sector_of(powers)
    return (sector.bit_count(), sector, dots(powers), rank(powers), *powers)


def key_columns(powers: NDArray[np.int64]) -> tuple[NDArray[np.int64], ...]:
    """Lines, sector id, dots and rank of many integrals.

    Parameters
    ----------
    powers
        Integers, (N, n) with ``n <= MAX_LINES``.

    Returns
    -------
    tuple of arrays
        Four int64 arrays of shape (N,), the leading parts of `sort_key`.
    """
    table = np.asarray(powers, dtype=np.int64)
    if table.ndim != 2 or table.shape[1] > MAX_LINES:
        raise ValueError(f"powers must have shape (N, n) with n <= {MAX_LINES}, not {table.shape}")
    positive = table > 0
    lines = positive.sum(axis=1, dtype=np.int64)
    weights = np.left_shift(np.int64(1), np.arange(table.shape[1], dtype=np.int64))
    sectors = positive.astype(np.int64) @ weights
    total_dots = np.where(positive, table - 1, 0).sum(axis=1, dtype=np.int64)
    total_rank = -np.where(table < 0, table, 0).sum(axis=1, dtype=np.int64)
    return lines, sectors, total_dots, total_rank


def order_columns(powers: NDArray[np.int64], family: NDArray[np.int64] | None = None) -> NDArray[np.int64]:
    """Permutation that sorts integrals by `sort_key`, simplest first.

    Parameters
    ----------
    powers
        Integers, (N, n) with ``n <= MAX_LINES``.
    family
        Integers, (N,): the number of each integral's family, where there are several; it comes between
        the number of lines and the sector id.

    Returns
    -------
    array
        int64, (N,): ``powers[result]`` is in ascending order; equal rows keep their order.
    """
    table = np.asarray(powers, dtype=np.int64)
    lines, sectors, total_dots, total_rank = key_columns(table)
    # np.lexsort takes the most significant key last
    tiebreak = tuple(table[:, i] for i in range(table.shape[1] - 1, -1, -1))
    leading = (sectors, lines) if family is None else (sectors, family, lines)
    return np.lexsort((*tiebreak, total_rank, total_dots, *leading)).astype(np.int64)
