"""The integrals of a system, numbered as they are met, and its rows before columns are ranked."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ibpred.identities.packing import Packing
from ibpred.identities.symmetry import Entries
from ibpred.kernels.gathering import Numbering
from ibpred.sectors.order import key_columns

IntArray = NDArray[np.int64]
NumberArray = NDArray[np.int32]


@dataclass(frozen=True)
class Part:
    """Some rows in coordinate form, integrals by their numbers: twelve bytes an entry.

    Attributes
    ----------
    row, integral, coefficient
        int32: the entries.
    owner
        int32: for each row the number of the integral or seed that it belongs to.
    """

    row: NumberArray
    integral: NumberArray
    coefficient: NumberArray
    owner: NumberArray


class IntegralCollection:
    """Numbers the integrals of a system, and finds those of a sector; lives while it is built.

    Parameters
    ----------
    codes
        The packing of each family.
    """

    def __init__(self, codes: Sequence[Packing]) -> None:
        self.codes = tuple(codes)
        self._numbering = Numbering()
        self._sectors = np.zeros((0, 2), dtype=np.int64)

    def __len__(self) -> int:
        return len(self._numbering)

    def part(self, entries: Entries, family: int) -> Part:
        """Rows of a family with their integrals numbered."""
        return Part(
            entries.row.astype(np.int32),
            self.numbers(entries.integral),
            entries.coefficient.astype(np.int32),
            self.numbers(self.codes[family].code(entries.owners)),
        )

    def numbers(self, codes: IntArray) -> NumberArray:
        """Numbers of codes."""
        found: NumberArray = self._numbering.numbers(codes)
        return found

    def vectors(self, first: int = 0) -> IntArray:
        """Powers of the integrals from a number on."""
        return self.codes[0].vectors(self._numbering.codes[first:])

    def places(self) -> IntArray:
        """Family and sector of every integral, (integrals, 2)."""
        first = len(self._sectors)
        if first < len(self):
            owners = self._numbering.codes[first:] // self.codes[0].total
            fresh = np.column_stack([owners, key_columns(self.vectors(first))[1]])
            self._sectors = np.vstack([self._sectors, fresh])
        return self._sectors

    def of_sector(self, family: int, sector: int) -> IntArray:
        """Powers of the integrals of a sector met so far, in the order of their codes."""
        places = self.places()
        chosen = np.flatnonzero((places[:, 1] == sector) & (places[:, 0] == family))
        return self.codes[0].vectors(np.sort(self._numbering.codes[chosen]))
