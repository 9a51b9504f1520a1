"""Numerators over Q: images modulo one prime after the other, lifted as soon as stable, confirmed afresh."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import partial

import numpy as np
from numpy.typing import NDArray

from ibpred.errors import ReconstructionError
from ibpred.reconstruct.denominators import Structure
from ibpred.reconstruct.factors import products
from ibpred.reconstruct.lift import chinese_remainder, rational_vector
from ibpred.reconstruct.modular import matrix_product, monomials, multiply, residues
from ibpred.reconstruct.notes import Notes
from ibpred.reconstruct.numerators import numerators
from ibpred.reconstruct.sampling import Draws, InconsistentError, UnluckyPrimeError

CONFIRMING_POINTS = 2


@dataclass
class _Open:
    """A numerator in the making: residues of the coefficients seen so far."""

    terms: dict[int, int]
    modulus: int
    lifted: tuple[dict[int, int], int] | None


def coefficients(
    draws: Draws,
    rows: NDArray[np.int64],
    found: Structure,
    exponents: NDArray[np.int64],
    full: list[NDArray[np.int64]],
    first_prime: int,
    others: Sequence[int],
    expected: int,
    notes: Notes,
    attempt: int,
) -> tuple[list[tuple[dict[tuple[int, ...], int], int]], list[int], NDArray[np.int64]]:
    """Numerators over Q, confirmed.

    Parameters
    ----------
    rows
        Entries of the sampler.
    found
        Their factors and bounds.
    exponents, full
        The monomials that may occur, and which of them in each row; see `universe`.
    first_prime, others
        Primes in the order in which they are used; the structure was found modulo the first one.
    expected
        Primes that are expected to be enough, for what is announced.
    notes, attempt
        Where the image modulo each prime is noted, and under which number.

    Returns
    -------
    lifted
        For each row integer terms and a denominator.
    used
        The primes whose images were combined.
    confirmed
        For each row the prime modulo which it was confirmed.

    Raises
    ------
    ReconstructionError
        If there are not enough primes.
    InconsistentError
        If a row does not fit what is known of it.
    """
    state = [_Open({}, 1, None) for _ in rows]
    confirmed = np.zeros(len(rows), dtype=np.int64)
    pending = np.arange(len(rows))
    used: list[int] = []
    for prime in (first_prime, *others):
        draws.begin(attempt, prime)
        try:
            if used:
                right = _confirm(draws, rows[pending], found, pending, prime, exponents, state)
                confirmed[pending[right]] = prime
                pending = pending[~right]
                if not len(pending):
                    break
            supports = [
                np.array(sorted(state[r].terms), dtype=np.int64) if used else full[r] for r in pending
            ]
            task = _Task(rows[pending], found, found.powers[pending], exponents, first_prime)
            left = max(1, expected - len(used))
            wide = [full[r] for r in pending]
            image = notes.kept(
                f"numerators {attempt} {prime}",
                Image,
                partial(_image, draws, task, prime, supports, wide, left),
            )
            draws.samples = image.samples
            _combine(pending, prime, image, state)
        except UnluckyPrimeError:
            continue
        used.append(prime)
    else:
        worst = int(pending[0]) if len(pending) else 0
        raise ReconstructionError(
            f"{len(pending)} of {len(rows)} distinct functions, first of them entry {int(rows[worst])}, "
            f"were not confirmed with {len(used)} primes for coefficients; give more primes"
        )
    result = []
    for item in state:
        assert item.lifted is not None
        terms, denominator = item.lifted
        result.append(({tuple(int(e) for e in exponents[m]): c for m, c in terms.items()}, denominator))
    return result, used, confirmed


@dataclass(frozen=True)
class _Task:
    """What the numerators of all pending rows have in common."""

    rows: NDArray[np.int64]
    found: Structure
    powers: NDArray[np.int64]
    exponents: NDArray[np.int64]
    structure_prime: int


@dataclass(frozen=True)
class Image:
    """Numerators modulo a prime.

    Attributes
    ----------
    terms
        For each pending row the indices of its monomials and their coefficients, alternating.
    samples
        Points drawn so far in all.
    """

    terms: tuple[tuple[int, ...], ...]
    samples: int


def _image(
    draws: Draws,
    task: _Task,
    prime: int,
    supports: list[NDArray[np.int64]],
    full: list[NDArray[np.int64]],
    primes_left: int,
) -> Image:
    """Interpolate the pending numerators modulo one more prime."""
    factors = task.found.factors
    image = numerators(draws, prime, task.rows, factors, task.powers, task.exponents, supports, primes_left)
    again = np.nonzero(~image.fits)[0]
    if len(again):  # a coefficient that vanishes modulo the earlier primes
        wide = [full[k] for k in again]
        retried = numerators(
            draws, prime, task.rows[again], factors, task.powers[again], task.exponents, wide, primes_left
        )
        if not retried.fits.all():
            entry = int(task.rows[again[np.argmin(retried.fits)]])
            raise InconsistentError(
                task.structure_prime,
                f"entry {entry} modulo {prime} is no polynomial of the degrees found along lines, after its "
                "denominator was removed; the black box is not one rational function of its variables",
            )
        for position, failed in enumerate(again):
            image.coefficients[failed] = retried.coefficients[position]
            image.supports[failed] = retried.supports[position]
    terms = []
    for support, values in zip(image.supports, image.coefficients, strict=True):
        alive = values != 0
        pairs = np.stack([support[alive], values[alive].astype(np.int64)], axis=1)
        terms.append(tuple(pairs.ravel().tolist()))
    return Image(tuple(terms), draws.samples)


def _combine(pending: NDArray[np.int64], prime: int, image: Image, state: list[_Open]) -> None:
    """Join an image to the earlier ones, and lift what can be lifted."""
    for r, terms in zip(pending, image.terms, strict=True):
        fresh = dict(zip(terms[::2], terms[1::2], strict=True))
        item = state[r]
        keys = sorted(set(item.terms) | set(fresh))
        combined = chinese_remainder(
            [item.terms.get(m, 0) for m in keys], item.modulus, [fresh.get(m, 0) for m in keys], prime
        )
        item.terms, item.modulus = dict(zip(keys, combined, strict=True)), item.modulus * prime
        numbers = rational_vector(combined, item.modulus)
        item.lifted = None if numbers is None else (dict(zip(keys, numbers[0], strict=True)), numbers[1])


def _confirm(
    draws: Draws,
    entries: NDArray[np.int64],
    found: Structure,
    pending: NDArray[np.int64],
    prime: int,
    exponents: NDArray[np.int64],
    state: list[_Open],
) -> NDArray[np.bool_]:
    """Which of the lifted functions agree with the black box at fresh points modulo a fresh prime."""
    draws.doing = "confirmation"
    points, values = draws.scattered(CONFIRMING_POINTS, prime, entries)
    known, good = products(found.factors, found.powers[pending], points, prime)
    if not good.all():
        raise UnluckyPrimeError(prime, len(good), int(good.sum()))
    expected = multiply(values, known, prime)
    basis = monomials(exponents, points, prime)
    right = np.zeros(len(pending), dtype=np.bool_)
    for k, r in enumerate(pending):
        lifted = state[r].lifted
        if lifted is None or lifted[1] % prime == 0:
            continue
        terms, denominator = lifted
        coefficients = residues([*terms.values()], prime)[None, :]
        total = matrix_product(coefficients, basis[list(terms)], prime)[0]
        right[k] = np.array_equal(total, multiply(expected[k], denominator % prime, prime))
    return right
