"""Finite groups of changes of momenta, built up one generator at a time."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from ibpred.sectors.forms import Matrix

_Key = tuple[object, ...]


class ChangeGroup:
    """A finite group of square matrices, a matrix and its negative taken as one element.

    Parameters
    ----------
    width
        Rows of the matrices.
    """

    def __init__(self, width: int) -> None:
        identity = np.array([[int(i == j) for j in range(width)] for i in range(width)], dtype=object)
        self._elements: NDArray[np.object_] = identity.reshape(1, width, width)
        self._keys: set[_Key] = {_key(identity)}
        self._generators: list[NDArray[np.object_]] = []

    def __len__(self) -> int:
        return len(self._keys)

    def __contains__(self, change: Matrix) -> bool:
        return _key(_array(change)) in self._keys

    def adjoin(self, change: Matrix) -> None:
        """Add a generator and all that it makes with the others.

        The new elements come as whole cosets of the group so far (Dimino's method, see G. Butler,
        Fundamental Algorithms for Permutation Groups, 1991), so each is made by one product.
        """
        generator = _array(change)
        self._generators.append(generator)
        base = self._elements
        cosets = [base]
        pending = [generator]
        while pending:
            factor = pending.pop()
            if _key(factor) in self._keys:
                continue
            coset = base @ factor
            self._keys.update(_key(element) for element in coset)
            cosets.append(coset)
            pending.extend(factor @ other for other in self._generators)
        self._elements = np.concatenate(cosets)


def _array(change: Matrix) -> NDArray[np.object_]:
    """Exact entries, integers where they are integral: those multiply faster than fractions."""
    return np.array([[x.numerator if x.denominator == 1 else x for x in row] for row in change], dtype=object)


def _key(matrix: NDArray[np.object_]) -> _Key:
    entries = tuple(matrix.ravel().tolist())
    first = next((x for x in entries if x), 1)
    return entries if first > 0 else tuple(-x for x in entries)
