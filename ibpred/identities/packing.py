"""Powers packed into one integer, so that shifts add and sets of integrals are sorted arrays."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from ibpred.errors import UnfinishedError

IntArray = NDArray[np.int64]


@dataclass(frozen=True)
class Packing:
    """Mixed-radix code of integer vectors within given bounds.

    Attributes
    ----------
    low
        int64, (n,): smallest value of each entry.
    size
        int64, (n,): number of values of each entry.
    weight
        int64, (n,): code = offset + sum_i (entry_i - low_i) * weight_i.
    offset
        A multiple of `total`: codes of several families are kept apart by it.
    """

    low: IntArray
    size: IntArray
    weight: IntArray
    offset: int = 0

    @property
    def total(self) -> int:
        """Number of vectors within the bounds."""
        return int(np.prod(self.size.astype(object)))

    def code(self, vectors: IntArray) -> IntArray:
        """Codes of the rows of an array of vectors."""
        return np.asarray((vectors - self.low) @ self.weight + self.offset)

    def shift(self, vectors: IntArray) -> IntArray:
        """What to add to a code when the vector is added."""
        return np.asarray(vectors @ self.weight)

    def vectors(self, codes: IntArray) -> IntArray:
        """The vectors of an array of codes."""
        return np.asarray(codes[:, None] // self.weight % self.size + self.low)

    def holds(self, vectors: IntArray) -> NDArray[np.bool_]:
        """Which rows lie within the bounds."""
        return np.asarray(((vectors >= self.low) & (vectors < self.low + self.size)).all(axis=1))


def packings(low: Sequence[int], high: Sequence[int], families: int) -> tuple[Packing, ...]:
    """One packing for each of several families, with codes that never agree."""
    first = packing(low, high, families)
    return tuple(replace(first, offset=number * first.total) for number in range(families))


def packing(low: Sequence[int], high: Sequence[int], families: int = 1) -> Packing:
    """The packing of vectors with ``low <= entry <= high``, with room for those of several families.

    Raises
    ------
    UnfinishedError
        If 63 bits do not suffice.
    """
    sizes = [top - bottom + 1 for bottom, top in zip(low, high, strict=True)]
    weights, total = [], 1
    for size in reversed(sizes):
        weights.append(total)
        total *= size
    if total * families >= 2**63:
        raise UnfinishedError(
            f"{len(sizes)} lines with powers from {min(low)} to {max(high)} do not fit the engine's "
            "64-bit integrals; ask for fewer dots or a lower rank"
        )
    return Packing(
        np.array(low, dtype=np.int64),
        np.array(sizes, dtype=np.int64),
        np.array(weights[::-1], dtype=np.int64),
    )
