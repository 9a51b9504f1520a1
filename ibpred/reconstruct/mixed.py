"""Degrees in several variables together, which say more about a numerator than single ones do.

A numerator of degree 8 in each of two variables need not contain their eighth powers in one monomial:
its degree along a line in that plane tells. The bounds cut corners off the box of exponents, and with
them samples of a dense interpolation; they are found where that saves more than it costs.
"""

from __future__ import annotations

from itertools import combinations

import numpy as np
from numpy.typing import NDArray

from ibpred.reconstruct.factors import Factor
from ibpred.reconstruct.probe import probe
from ibpred.reconstruct.sampling import Draws
from ibpred.reconstruct.support import UNBOUNDED, size_within

Subset = tuple[int, ...]
"""Positions of variables."""

_WORTH = 2  # the largest numerator must have so many times the terms that the probing costs samples
_LARGE = 8  # numerators are probed down to this fraction of the largest


def mixed_bounds(
    draws: Draws,
    prime: int,
    rows: NDArray[np.int64],
    factors: tuple[Factor, ...],
    powers: NDArray[np.int64],
    bounds: NDArray[np.int64],
    samples: int,
    degree_limit: int,
) -> tuple[tuple[Subset, ...], NDArray[np.int64]]:
    """Degrees of numerators in pairs of variables, and in all variables but one.

    Parameters
    ----------
    prime
        Modulo which to look.
    rows
        Entries of the sampler.
    factors, powers, bounds
        What is known of them, see `Structure`; factors with negative power belong to the numerator and
        are not counted.
    samples
        What one line takes.
    degree_limit
        As in a reconstruction.

    Returns
    -------
    subsets, degrees
        (rows, subsets): ``UNBOUNDED`` for rows that were not looked at; no subsets where it is not worth it.
    """
    count = draws.variables
    nothing = (), np.zeros((len(rows), 0), dtype=np.int64)
    if count < 3 or not len(rows):
        return nothing
    subsets = tuple(dict.fromkeys((*combinations(range(count), 2), *combinations(range(count), count - 1))))
    sizes = np.array([size_within(bound[:-1].tolist(), int(bound[-1])) for bound in bounds])
    if sizes.max() <= _WORTH * samples * len(subsets):
        return nothing
    large = np.nonzero(sizes * _LARGE >= sizes.max())[0]
    draws.doing = "mixed degrees"
    found = np.full((len(rows), len(subsets)), UNBOUNDED, dtype=np.int64)
    for k, subset in enumerate(subsets):
        base, direction = draws.residues(count, prime), draws.residues(count, prime)
        direction[[i for i in range(count) if i not in subset]] = 0
        line = probe(draws, base, direction, prime, rows[large], degree_limit, samples)
        found[large, k] = line.degrees()[:, 0]
        for f, item in enumerate(factors):
            own = int(item.exponents[:, list(subset)].sum(axis=1).max())
            found[large, k] -= np.maximum(-powers[large, f], 0) * own
    return subsets, found
