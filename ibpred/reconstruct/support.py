"""Sets of monomials: what a polynomial may contain, and how supports share one linear system."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from ibpred.errors import ReconstructionError

LARGEST_SUPPORT = 2_000_000
UNBOUNDED = 2**30
"""A degree that is not known."""
Mixed = Sequence[tuple[tuple[int, ...], int]]
"""Sets of variables, and how much their exponents may add up to."""
_COMPARED = 16  # systems that a support is compared with


def monomials_within(
    degrees: Sequence[int], total: int, lowest: int = 0, mixed: Mixed = ()
) -> NDArray[np.int64]:
    """All exponents with e_i <= degrees[i] and lowest <= sum <= total, in lexicographic order.

    Parameters
    ----------
    mixed
        Further bounds: the sum over some variables is at most so much.

    Raises
    ------
    ReconstructionError
        If there are more than can be handled.
    """
    found = np.zeros((1, 0), dtype=np.int64)
    sums = np.zeros(1, dtype=np.int64)
    partial = np.zeros((1, len(mixed)), dtype=np.int64)
    limits = np.array([bound for _, bound in mixed], dtype=np.int64)
    for i, degree in enumerate(degrees):
        rest = int(sum(degrees[i + 1 :]))
        steps = np.arange(degree + 1)
        new_sums = sums[:, None] + steps[None, :]
        inside = (new_sums <= total) & (new_sums + rest >= lowest)
        touched = [k for k, (subset, _) in enumerate(mixed) if i in subset]
        for k in touched:
            inside &= partial[:, k, None] + steps[None, :] <= limits[k]
        old, step = np.nonzero(inside)
        if len(old) > LARGEST_SUPPORT:
            raise ReconstructionError(
                f"a numerator with degrees {tuple(degrees)} and total degree {total} has more than "
                f"{LARGEST_SUPPORT} monomials; fix some variables to numbers or choose other masters"
            )
        found = np.concatenate([found[old], step[:, None]], axis=1)
        sums = new_sums[old, step]
        partial = partial[old]
        partial[:, touched] += step[:, None]
    keep = (sums <= total) & (sums >= lowest) & (partial <= limits).all(axis=1)
    return found[keep]


def size_within(degrees: Sequence[int], total: int) -> int:
    """Number of exponents with e_i <= degrees[i] and sum <= total; none for a negative total."""
    if total < 0:
        return 0
    counts = [1] + [0] * total  # exponents so far by their sum
    for degree in degrees:
        window, fresh = 0, []
        for k in range(total + 1):
            window += counts[k] - (counts[k - degree - 1] if k > degree else 0)
            fresh.append(window)
        counts = fresh
    return sum(counts)


def universe(
    bounds: NDArray[np.int64],
    subsets: Sequence[tuple[int, ...]] = (),
    mixed: NDArray[np.int64] | None = None,
) -> tuple[NDArray[np.int64], list[NDArray[np.int64]]]:
    """Union of the monomials within several degree bounds, and each one's share of it.

    Parameters
    ----------
    bounds
        (rows, variables + 1): degrees and total degree of each row; a negative total means empty.
    subsets, mixed
        Sets of variables and (rows, subsets) the degrees in them together, ``UNBOUNDED`` where unknown.

    Returns
    -------
    exponents, members
        (monomials, variables); for each row the sorted indices of its monomials.
    """
    variables = bounds.shape[1] - 1
    whole = bounds if mixed is None else np.concatenate([bounds, mixed], axis=1)
    distinct, inverse = np.unique(whole, axis=0, return_inverse=True)
    sets = []
    for row in distinct.tolist():
        known = zip(subsets, row[variables + 1 :], strict=True)
        extra = [(subset, bound) for subset, bound in known if bound < UNBOUNDED]
        sets.append(monomials_within(row[:variables], row[variables], mixed=extra))
    if variables == 0:
        exponents = np.zeros((1, 0), dtype=np.int64)
        shares = [np.arange(len(part)) for part in sets]
    else:
        lengths = np.cumsum([0] + [len(part) for part in sets])
        stacked = np.concatenate(sets) if sets else np.zeros((0, variables), dtype=np.int64)
        exponents, index = np.unique(stacked, axis=0, return_inverse=True)
        index = index.reshape(-1)
        shares = [np.sort(index[a:b]) for a, b in pairwise(lengths)]
    return exponents, [shares[i] for i in inverse.reshape(-1)]


def shared_systems(
    supports: Sequence[NDArray[np.int64]], size: int, capacity: int
) -> list[tuple[NDArray[np.int64], list[int]]]:
    """Put rows with similar supports into one linear system each, where that saves work.

    A system with s monomials for r rows is taken to cost ``(r + 1) s^2``.

    Parameters
    ----------
    supports
        Indices of monomials, each at most `capacity` many.
    size
        Number of monomials in all.
    capacity
        Monomials that the samples at hand determine.

    Returns
    -------
    list of (joint support, rows)
    """
    distinct: dict[bytes, list[int]] = {}
    for row, support in enumerate(supports):
        distinct.setdefault(np.asarray(support, dtype=np.int64).tobytes(), []).append(row)
    order = sorted(distinct.values(), key=lambda rows: (-len(supports[rows[0]]), rows[0]))
    masks: list[NDArray[np.bool_]] = []
    members: list[list[int]] = []

    def cost(count: int, rows: int) -> int:
        return (rows + 1) * count * count

    for rows in order:
        support = supports[rows[0]]
        alone = cost(len(support), len(rows))
        for mask, inside in zip(masks[-_COMPARED:], members[-_COMPARED:], strict=True):
            before = int(mask.sum())
            joint = before + int((~mask[support]).sum())
            cheaper = cost(joint, len(inside) + len(rows)) <= cost(before, len(inside)) + alone
            if joint <= capacity and cheaper:
                mask[support] = True
                inside.extend(rows)
                break
        else:
            mask = np.zeros(size, dtype=np.bool_)
            mask[support] = True
            masks.append(mask)
            members.append(list(rows))
    return [(np.nonzero(mask)[0], inside) for mask, inside in zip(masks, members, strict=True)]
