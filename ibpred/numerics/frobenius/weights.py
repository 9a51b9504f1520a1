"""Scales of the functions of a system in which its matrices look small."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

_ITERATIONS = 60


def perron_weights(bound: Floats) -> Floats:
    """Positive weights w with ``bound w <= (rho + slack) w``, rho the largest spectral radius of a block.

    Inside a coupled block the Perron vector; each block is weighted such that what it takes from the blocks
    before it stays below a slack of a few units.
    """
    weights = np.ones(len(bound))
    blocks = _ordered_blocks(bound > 0)
    vectors = [_perron_vector(bound[np.ix_(block, block)]) for block in blocks]
    radii = [
        float((bound[np.ix_(block, block)] @ v / v).max()) for block, v in zip(blocks, vectors, strict=True)
    ]
    slack = 4 + max(radii, default=0.0)
    before: list[int] = []
    for block, vector in zip(blocks, vectors, strict=True):
        scale = 1.0
        if before:
            load = bound[np.ix_(block, before)] @ weights[before] / vector
            scale = max(1e-250, float(load.max()) / slack) if load.max() > 0 else 1.0
        weights[block] = np.minimum(scale * vector, 1e250)
        before += block
    return weights


def _perron_vector(matrix: Floats) -> Floats:
    """A vector near the Perron vector of an irreducible matrix, also where its entries differ by orders."""
    scale = _balanced(matrix)
    balanced = matrix * scale[None, :] / scale[:, None]
    # the shift makes the iteration converge for cyclic matrices too
    shifted = balanced + np.eye(len(matrix)) * (0.1 * balanced.max(initial=0.0) + 1e-100)
    vector = np.ones(len(matrix))
    for _ in range(_ITERATIONS):
        vector = shifted @ vector
        vector /= vector.max()
    return np.maximum(vector, 1e-30) * scale


def _balanced(matrix: Floats) -> Floats:
    """Diagonal scaling that makes rows and columns alike (E. E. Osborne, J. ACM 7 (1960) 338)."""
    scale = np.ones(len(matrix))
    bare = matrix - np.diag(np.diag(matrix))
    if len(matrix) == 1:
        return scale
    for _ in range(_ITERATIONS):
        for i in range(len(matrix)):
            row, column = bare[i] @ scale, bare[:, i] @ (1 / scale)
            if row > 0 and column > 0:
                scale[i] = np.sqrt(row / column)
    return scale


def _ordered_blocks(pattern: NDArray[np.bool_]) -> list[list[int]]:
    """Coupled sets of indices, each after those it depends on."""
    reach = pattern | np.eye(len(pattern), dtype=bool)
    for middle in range(len(pattern)):
        reach |= np.outer(reach[:, middle], reach[middle])
    blocks: dict[int, list[int]] = {}
    for i in range(len(pattern)):
        first = int(np.flatnonzero(reach[i] & reach[:, i])[0])
        blocks.setdefault(first, []).append(i)
    return [blocks[first] for first in sorted(blocks, key=lambda i: (int(reach[i].sum()), i))]
