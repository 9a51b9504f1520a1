"""Seeds: the powers at which the identities of a sector are written down."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

IntArray = NDArray[np.int64]


@dataclass(frozen=True)
class Depth:
    """How far seeds reach in a sector: at most `dots` dots and rank `rank`."""

    dots: int
    rank: int

    def cover(self, other: Depth) -> Depth:
        """The smallest depth that holds both."""
        return Depth(max(self.dots, other.dots), max(self.rank, other.rank))


SeedPlan = Mapping[int, Depth]
"""The depth of the seeds of each sector (by its id)."""


@lru_cache(maxsize=256)
def _bounded(parts: int, most: int) -> IntArray:
    """All vectors of `parts` non-negative integers with sum at most `most`, in lexical order."""
    if parts == 0:
        return np.zeros((1, 0), dtype=np.int64)
    blocks = []
    for first in range(most + 1):
        rest = _bounded(parts - 1, most - first)
        blocks.append(np.hstack([np.full((len(rest), 1), first, dtype=np.int64), rest]))
    return np.vstack(blocks)


def seeds_of_sector(sector: int, lines: int, depth: Depth) -> IntArray:
    """All powers of a sector within a depth.

    Parameters
    ----------
    sector
        Bit i is set where line i has a positive power.
    lines
        Number of lines of the family, numerators included.
    depth
        Largest sum of dots and of numerator powers.

    Returns
    -------
    int64, (seeds, lines)
    """
    inside = [i for i in range(lines) if sector >> i & 1]
    outside = [i for i in range(lines) if not sector >> i & 1]
    dots = _bounded(len(inside), depth.dots)
    numerators = _bounded(len(outside), depth.rank)
    seeds = np.zeros((len(dots), len(numerators), lines), dtype=np.int64)
    seeds[:, :, inside] = 1 + dots[:, None, :]
    seeds[:, :, outside] = -numerators[None, :, :]
    return seeds.reshape(-1, lines)


def subsectors(sectors: Iterable[int]) -> frozenset[int]:
    """All sectors contained in the given ones, themselves included."""
    found = {0}
    for sector in sectors:
        part = sector
        while part:
            found.add(part)
            part = (part - 1) & sector
    return frozenset(found)
