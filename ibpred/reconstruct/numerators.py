"""Numerators modulo a prime, from samples along one geometric sequence shared by all entries.

At the points ``start * ratio**j`` a monomial takes the values ``start^m * (ratio^m)**j``: every
numerator is a sum of exponentials in j. With a support given in advance its coefficients solve a
Vandermonde system; a support much smaller than the degrees allow is found first, from the linear
recurrence of a random combination of the entries (Ben-Or, Tiwari, STOC 1988; candidates for the
monomials are tested as roots, as in Kaltofen, Lakshman, ISSAC 1988).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ibpred.reconstruct.exponentials import exponential_coefficients
from ibpred.reconstruct.factors import Factor, products
from ibpred.reconstruct.modular import (
    Residues,
    add,
    invert,
    matrix_product,
    monomials,
    multiply,
)
from ibpred.reconstruct.sampling import PATIENCE, Draws, UnluckyPrimeError
from ibpred.reconstruct.support import shared_systems
from ibpred.reconstruct.univariate import SURPLUS, polynomial, rational_function

_FIRST_COUNT = 48


@dataclass(frozen=True)
class Numerators:
    """Coefficients modulo a prime.

    Attributes
    ----------
    coefficients
        For each row one residue per monomial of its support.
    supports
        For each row indices into the universe of monomials.
    fits
        (rows,): whether the surplus samples agree.
    """

    coefficients: list[Residues]
    supports: list[NDArray[np.int64]]
    fits: NDArray[np.bool_]


@dataclass(frozen=True)
class _Sequence:
    prime: int
    start: Residues
    ratio: Residues
    values: Residues  # (rows, K): of the numerators
    good: NDArray[np.bool_]  # (K,)

    @property
    def usable(self) -> int:
        return int(self.good.sum())


def _extend(
    draws: Draws,
    sequence: _Sequence,
    count: int,
    rows: NDArray[np.int64],
    factors: tuple[Factor, ...],
    powers: NDArray[np.int64],
) -> _Sequence:
    """Continue until `count` lanes are good."""
    prime = sequence.prime
    distinct, inverse = np.unique(powers, axis=0, return_inverse=True)
    values, good = sequence.values, sequence.good
    while int(good.sum()) < count:
        old, need = len(good), count - int(good.sum())
        steps = range(old, old + need)
        table = np.array([[pow(int(g), j, prime) for j in steps] for g in sequence.ratio], dtype=np.uint64)
        table = table.reshape(len(sequence.ratio), need)
        points = multiply(sequence.start[:, None], table, prime)
        found, usable = draws.at(points, prime, rows)
        known, regular = products(factors, distinct, points, prime)
        values = np.concatenate([values, multiply(found, known[inverse.reshape(-1)], prime)], axis=1)
        good = np.concatenate([good, usable & regular])
        if len(good) > PATIENCE * (int(good.sum()) + 4):
            raise UnluckyPrimeError(prime, len(good), int(good.sum()))
    return _Sequence(prime, sequence.start, sequence.ratio, values, good)


def numerators(
    draws: Draws,
    prime: int,
    rows: NDArray[np.int64],
    factors: tuple[Factor, ...],
    powers: NDArray[np.int64],
    exponents: NDArray[np.int64],
    candidates: Sequence[NDArray[np.int64]],
    primes_left: int = 1,
) -> Numerators:
    """Interpolate the numerators of all rows modulo a prime.

    Parameters
    ----------
    rows
        Entries of the sampler.
    factors, powers
        An entry times ``prod factors**powers`` is the polynomial to be found.
    exponents
        (monomials, variables): the universe of monomials.
    candidates
        For each row the monomials (indices, sorted) that may occur.
    primes_left
        Primes expected to follow, this one included: for the number of samples that is announced.

    Raises
    ------
    UnluckyPrimeError
        If bad lanes prevail.
    """
    draws.doing = "numerators"
    empty = np.zeros((len(rows), 0), dtype=np.uint64)
    start = draws.residues(draws.variables, prime)
    ratio = draws.residues(draws.variables, prime)
    sequence = _Sequence(prime, start, ratio, empty, np.zeros(0, dtype=np.bool_))
    nodes = monomials(exponents, ratio[:, None], prime)[:, 0]
    if len(np.unique(nodes)) != len(nodes):
        raise UnluckyPrimeError(prime, len(nodes), 0)
    supports = [np.asarray(support) for support in candidates]
    count = _FIRST_COUNT
    while True:
        target = max((len(support) for support in supports), default=0) + SURPLUS
        draws.expected = draws.samples + max(0, primes_left * target - sequence.usable)
        sequence = _extend(draws, sequence, min(count, target), rows, factors, powers)
        capacity = sequence.usable - SURPLUS
        if target <= sequence.usable:
            break
        wide = [r for r, support in enumerate(supports) if len(support) > capacity]
        for r, support in _narrowed(draws, sequence, wide, supports, nodes):
            supports[r] = support
        count = count * 4 // 3
    coefficients: list[Residues] = [np.zeros(0, dtype=np.uint64)] * len(rows)
    fits = np.zeros(len(rows), dtype=np.bool_)
    scale = invert(monomials(exponents, start[:, None], prime)[:, 0], prime)
    usable = np.cumsum(sequence.good)
    for support, members in shared_systems(supports, len(exponents), capacity):
        length = int(np.searchsorted(usable, len(support) + SURPLUS)) + 1
        values, good = sequence.values[members][:, :length], sequence.good[:length]
        solved, right = exponential_coefficients(values, good, nodes[support], prime)
        solved = multiply(solved, scale[support][None, :], prime)
        for k, r in enumerate(members):
            coefficients[r] = solved[k]
            supports[r] = support
        fits[members] = right
    return Numerators(coefficients, supports, fits)


def _narrowed(
    draws: Draws,
    sequence: _Sequence,
    wide: list[int],
    supports: list[NDArray[np.int64]],
    nodes: Residues,
) -> list[tuple[int, NDArray[np.int64]]]:
    """Wide rows whose supports the samples so far determine: all of them jointly, or one by one."""
    if not sequence.good.all():
        return []
    prime = sequence.prime
    weights = draws.residues(len(wide), prime)[None, :]
    combination = matrix_product(weights, sequence.values[wide], prime)[0]
    possible = np.unique(np.concatenate([supports[r] for r in wide]))
    joint = _sparse_support(combination, possible, nodes, prime)
    if joint is not None:
        return [(r, np.intersect1d(supports[r], joint)) for r in wide]
    found = []
    trial = wide[int(draws.random.integers(len(wide)))]
    if _sparse_support(sequence.values[trial], supports[trial], nodes, prime) is not None:
        for r in wide:
            alone = _sparse_support(sequence.values[r], supports[r], nodes, prime)
            if alone is not None:
                found.append((r, alone))
    return found


def _sparse_support(
    values: Residues, possible: NDArray[np.int64], nodes: Residues, prime: int
) -> NDArray[np.int64] | None:
    """Support of one sum of exponentials, if the values determine its linear recurrence."""
    power = polynomial([0] * len(values) + [1], prime)
    pair = rational_function(power, polynomial(values, prime))
    if pair is None:
        return None
    recurrence = pair[1]
    terms = max(recurrence.degree(), pair[0].degree() + 1)
    # prod (1 - v z) is reversed to prod (z - v), whose roots are the nodes of the support
    total = np.zeros(len(possible), dtype=np.uint64)
    for k in range(terms + 1):
        coefficient = int(recurrence[k]) if k <= recurrence.degree() else 0
        total = add(multiply(total, nodes[possible], prime), coefficient, prime)
    support = possible[total == 0]
    return support if len(support) == terms else None
