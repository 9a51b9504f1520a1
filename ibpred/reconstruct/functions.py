"""From a black box to exact rational functions, with the evidence for them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ibpred.errors import ReconstructionError
from ibpred.exact.rational import Polynomial, Rational, Ring, polynomial_text
from ibpred.exact.rational import ring as ring_of
from ibpred.reconstruct.denominators import Probes, Structure, structure
from ibpred.reconstruct.factors import products
from ibpred.reconstruct.lift import chinese_remainder, rational_vector
from ibpred.reconstruct.modular import (
    LARGEST_BITS,
    SMALLEST_BITS,
    matrix_product,
    monomials,
    multiply,
    residues,
)
from ibpred.reconstruct.numerators import numerators
from ibpred.reconstruct.probe import Probe, equal_rows, probe
from ibpred.reconstruct.sampling import Draws, InconsistentError, Progress, Sampler, UnluckyPrimeError
from ibpred.reconstruct.support import universe

_CONFIRMING_POINTS = 2
_ATTEMPTS = 3


@dataclass(frozen=True)
class Evidence:
    """How a reconstruction was obtained and confirmed.

    Attributes
    ----------
    samples
        Points at which the black box was evaluated, all primes together.
    distinct
        Number of different functions among the entries.
    degrees
        For each entry the total degrees of numerator and denominator; -1 for the zero numerator.
    factors
        The irreducible denominator factors.
    structure_primes
        The primes modulo which degrees and factors were found and checked.
    data_primes
        The primes whose residues determined the coefficients.
    confirmed
        For each entry the prime, none of those that its structure and coefficients came from,
        modulo which it was confirmed at `points` random points.
    points
        Number of confirming points.
    """

    samples: int
    distinct: int
    degrees: tuple[tuple[int, int], ...]
    factors: tuple[str, ...]
    structure_primes: tuple[int, int]
    data_primes: tuple[int, ...]
    confirmed: tuple[int, ...]
    points: int


@dataclass(frozen=True)
class Reconstruction:
    """Exact functions and the evidence for them.

    Attributes
    ----------
    entries
        In the sampler's order; equal entries are the same object.
    evidence
        How they were obtained and confirmed.
    """

    entries: tuple[Rational, ...]
    evidence: Evidence


def reconstruct(
    sampler: Sampler,
    primes: Sequence[int],
    seed: int,
    ring: Ring,
    *,
    degree_limit: int = 400,
    progress: Progress | None = None,
) -> Reconstruction:
    """Reconstruct every entry of a black box as a rational function over Q.

    The functions are known with overwhelming probability, not proved: each one is confirmed at
    random points modulo a prime that had no part in finding it.

    Parameters
    ----------
    sampler
        The black box.
    primes
        Distinct primes of 40 to 50 bits, in the order in which they are used. Coefficients with n
        digits in all need about n/14 primes, and two more are needed for structure and checks.
    seed
        All random points follow from it: equal arguments give equal results.
    ring
        Ring of the results; it holds the sampler's variables.
    degree_limit
        Largest sum of numerator and denominator degree along a line.
    progress
        Called with the present step and the number of samples so far.

    Raises
    ------
    ValueError
        If a prime has the wrong size or occurs twice.
    ReconstructionError
        If the black box is not rational within the degree limit, contradicts itself, or needs
        more primes than given; the message says which entry and what to do.
    """
    for name in sampler.variables:
        ring.index(name)
    for prime in primes:
        if not SMALLEST_BITS <= prime.bit_length() <= LARGEST_BITS:
            raise ValueError(f"the prime {prime} has not {SMALLEST_BITS} to {LARGEST_BITS} bits")
    if len(set(primes)) != len(primes):
        raise ValueError("the primes of a reconstruction must be distinct")
    draws = Draws(sampler, seed, progress)
    order = list(primes)
    for _ in range(_ATTEMPTS - 1):
        try:
            return _attempt(draws, order, ring, degree_limit)
        except InconsistentError as error:  # that prime may hide a degree: it goes to the end
            order = [prime for prime in order if prime != error.prime] + [error.prime]
    return _attempt(draws, order, ring, degree_limit)


def _attempt(draws: Draws, primes: Sequence[int], ring: Ring, degree_limit: int) -> Reconstruction:
    """One reconstruction with the structure taken modulo the first primes that agree."""
    first, second = _agreeing_probes(draws, primes, degree_limit)
    label, rows = equal_rows(np.stack([first.label, second.label], axis=1).astype(np.uint64))
    first, second = _restricted(first, rows), _restricted(second, rows)
    slices = _slices(draws, first, rows, degree_limit)
    front = (first.line.prime, second.line.prime)
    others = tuple(prime for prime in primes if prime not in front)
    own_ring = ring_of(draws.sampler.variables)
    found = structure(draws, Probes(rows, first, second, slices, front + others, own_ring))
    lifted, data_primes, confirmed = _coefficients(draws, rows, found, front[0], others)
    entries = _assembled(lifted, found, own_ring, ring)
    degrees = first.degrees()
    used_factors = [item for k, item in enumerate(found.factors) if (found.powers[:, k] > 0).any()]
    return Reconstruction(
        tuple(entries[i] for i in label),
        Evidence(
            samples=draws.samples,
            distinct=len(rows),
            degrees=tuple((int(degrees[i, 0]), int(degrees[i, 1])) for i in label),
            factors=tuple(polynomial_text(item.polynomial) for item in used_factors),
            structure_primes=front,
            data_primes=tuple(data_primes),
            confirmed=tuple(int(confirmed[i]) for i in label),
            points=_CONFIRMING_POINTS,
        ),
    )


def _agreeing_probes(draws: Draws, primes: Sequence[int], degree_limit: int) -> tuple[Probe, Probe]:
    """All entries along a random line modulo two primes that show the same degrees."""
    draws.doing = "degrees"
    rows = np.arange(draws.sampler.entries)
    earlier: list[Probe] = []
    for prime in primes:
        base = draws.residues(draws.variables, prime)
        direction = draws.residues(draws.variables, prime)
        if draws.variables == 1:
            base[0], direction[0] = 0, 1  # serves as the coordinate line, too
        hint = len(earlier[-1].line.nodes) if earlier else 0
        try:
            now = probe(draws, base, direction, prime, rows, degree_limit, hint)
        except UnluckyPrimeError:
            continue
        for before in earlier:
            if np.array_equal(before.degrees(), now.degrees()):
                return before, now
        earlier.append(now)
    raise ReconstructionError(
        f"{len(primes)} primes were not enough: no two of them gave usable samples and the same degrees "
        "along random lines; give more primes, or look for what makes the black box singular"
    )


def _restricted(whole: Probe, rows: NDArray[np.int64]) -> Probe:
    return Probe(whole.line, whole.label[rows], whole.functions)


def _slices(draws: Draws, first: Probe, rows: NDArray[np.int64], degree_limit: int) -> tuple[Probe, ...]:
    """All rows along each coordinate; with one variable every line is one already."""
    prime, count = first.line.prime, draws.variables
    if count == 1:
        return (first,)
    pieces = []
    for i in range(count):
        base = draws.residues(count, prime)
        direction = np.zeros(count, dtype=np.uint64)
        base[i], direction[i] = 0, 1
        pieces.append(probe(draws, base, direction, prime, rows, degree_limit))
    return tuple(pieces)


@dataclass
class _Open:
    """A numerator in the making: residues of the coefficients seen so far."""

    terms: dict[int, int]
    modulus: int
    lifted: tuple[dict[int, int], int] | None


def _coefficients(
    draws: Draws,
    rows: NDArray[np.int64],
    found: Structure,
    first_prime: int,
    others: Sequence[int],
) -> tuple[list[tuple[dict[tuple[int, ...], int], int]], list[int], NDArray[np.int64]]:
    """Numerators over Q: integer terms and a denominator; primes used; confirming primes."""
    exponents, full = universe(found.bounds)
    state = [_Open({}, 1, None) for _ in rows]
    confirmed = np.zeros(len(rows), dtype=np.int64)
    pending = np.arange(len(rows))
    used: list[int] = []
    for prime in (first_prime, *others):
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
            _add_prime(draws, rows, found, pending, prime, exponents, full, supports, state, first_prime)
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


def _add_prime(
    draws: Draws,
    rows: NDArray[np.int64],
    found: Structure,
    pending: NDArray[np.int64],
    prime: int,
    exponents: NDArray[np.int64],
    full: list[NDArray[np.int64]],
    supports: list[NDArray[np.int64]],
    state: list[_Open],
    structure_prime: int,
) -> None:
    """Interpolate the pending numerators modulo one more prime and lift what can be lifted."""
    powers = found.powers[pending]
    image = numerators(draws, prime, rows[pending], found.factors, powers, exponents, supports)
    again = np.nonzero(~image.fits)[0]
    if len(again):  # a coefficient that vanishes modulo the earlier primes
        wide = [full[pending[k]] for k in again]
        retried = numerators(
            draws, prime, rows[pending[again]], found.factors, powers[again], exponents, wide
        )
        if not retried.fits.all():
            entry = int(rows[pending[again[np.argmin(retried.fits)]]])
            raise InconsistentError(
                structure_prime,
                f"entry {entry} modulo {prime} is no polynomial of the degrees found along lines, after its "
                "denominator was removed; the black box is not one rational function of its variables",
            )
        for position, failed in enumerate(again):
            image.coefficients[failed] = retried.coefficients[position]
            image.supports[failed] = retried.supports[position]
    for k, r in enumerate(pending):
        fresh = {int(m): int(c) for m, c in zip(image.supports[k], image.coefficients[k], strict=True) if c}
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
    points, values = draws.scattered(_CONFIRMING_POINTS, prime, entries)
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


def _assembled(
    numerators_: Sequence[tuple[dict[tuple[int, ...], int], int]], found: Structure, own: Ring, target: Ring
) -> list[Rational]:
    """Fractions in the target ring; numerator and denominator are coprime by construction."""
    places = [target.index(name) for name in own.names]

    def moved(terms: dict[tuple[int, ...], int]) -> Polynomial:
        result = {}
        for exponents, coefficient in terms.items():
            key = [0] * len(target.names)
            for place, exponent in zip(places, exponents, strict=True):
                key[place] = exponent
            result[tuple(key)] = coefficient
        return target.polynomial(result)

    factors = [
        moved({tuple(map(int, e)): c for e, c in zip(f.exponents, f.coefficients, strict=True)})
        for f in found.factors
    ]
    known: dict[bytes, tuple[Polynomial, Polynomial]] = {}
    entries = []
    for (terms, denominator), powers in zip(numerators_, found.powers, strict=True):
        key = powers.tobytes()
        if key not in known:
            above = below = target.polynomial({(0,) * len(target.names): 1})
            for item, power in zip(factors, powers, strict=True):
                if power > 0:
                    below = below * item ** int(power)
                elif power < 0:
                    above = above * item ** -int(power)
            known[key] = above, below
        above, below = known[key]
        numerator = moved(terms) * above
        if numerator.is_zero():
            entries.append(target.zero)
            continue
        below = below * denominator
        if below.leading_coefficient() < 0:
            numerator, below = -numerator, -below
        entries.append(Rational(target, numerator, below))
    return entries
