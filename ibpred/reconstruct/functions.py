"""From a black box to exact rational functions, with the evidence for them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import partial

import numpy as np
from numpy.typing import NDArray

from ibpred.errors import ReconstructionError
from ibpred.exact.polynomial import plain_terms
from ibpred.exact.rational import Polynomial, Rational, Ring, polynomial_text
from ibpred.exact.rational import ring as ring_of
from ibpred.reconstruct.coefficients import CONFIRMING_POINTS, coefficients
from ibpred.reconstruct.denominators import Probes, Structure, structure
from ibpred.reconstruct.factors import factor
from ibpred.reconstruct.mixed import mixed_bounds
from ibpred.reconstruct.modular import LARGEST_BITS, SMALLEST_BITS
from ibpred.reconstruct.notes import FORGETFUL, Notes
from ibpred.reconstruct.plan import UNWATCHED, Plan, Watch
from ibpred.reconstruct.probe import Probe, equal_rows, probe
from ibpred.reconstruct.sampling import Draws, InconsistentError, Sampler, UnluckyPrimeError
from ibpred.reconstruct.sizes import primes_needed
from ibpred.reconstruct.support import universe
from ibpred.reconstruct.univariate import SURPLUS

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
    notes: Notes = FORGETFUL,
    watch: Watch = UNWATCHED,
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
    notes
        Where finished parts are kept, so that an interrupted reconstruction goes on from them; the
        result is the same. They must belong to this black box, these primes and this seed.
    watch
        Told about the samples, and about the plan once degrees and denominators are known.

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
    draws = Draws(sampler, seed, watch)
    order = list(primes)
    for number in range(_ATTEMPTS - 1):
        try:
            return _attempt(draws, order, ring, degree_limit, notes, number)
        except InconsistentError as error:  # that prime may hide a degree: it goes to the end
            order = [prime for prime in order if prime != error.prime] + [error.prime]
    return _attempt(draws, order, ring, degree_limit, notes, _ATTEMPTS - 1)


@dataclass(frozen=True)
class Outline:
    """What is known of a black box before its numerators are interpolated; plain data, to be noted.

    Attributes
    ----------
    label, rows
        For each entry its number among the distinct ones; for each distinct one its first entry.
    degrees
        Of each distinct entry: total degrees of numerator and denominator.
    front
        The primes of the structure.
    factors
        Terms (exponents, coefficient) of each common factor.
    powers, bounds, subsets, mixed
        As in a `Structure`.
    primes
        Primes that the coefficients are expected to need.
    samples
        Points drawn so far.
    """

    label: tuple[int, ...]
    rows: tuple[int, ...]
    degrees: tuple[tuple[int, int], ...]
    front: tuple[int, int]
    factors: tuple[tuple[tuple[tuple[int, ...], int], ...], ...]
    powers: tuple[tuple[int, ...], ...]
    bounds: tuple[tuple[int, ...], ...]
    subsets: tuple[tuple[int, ...], ...]
    mixed: tuple[tuple[int, ...], ...]
    primes: int
    samples: int

    def structure(self, own: Ring) -> Structure:
        """The structure in arrays."""
        return Structure(
            tuple(factor(own.polynomial(dict(terms)), own) for terms in self.factors),
            np.array(self.powers, dtype=np.int64).reshape(len(self.rows), len(self.factors)),
            np.array(self.bounds, dtype=np.int64).reshape(len(self.rows), len(own.names) + 1),
            self.subsets,
            np.array(self.mixed, dtype=np.int64).reshape(len(self.rows), len(self.subsets)),
        )

    def plan(self, names: tuple[str, ...], terms: int) -> Plan:
        """What numerators of up to so many terms will take."""
        samples = self.samples + self.primes * (terms + SURPLUS + CONFIRMING_POINTS)
        top = max((above for above, _ in self.degrees), default=0)
        bottom = max((below for _, below in self.degrees), default=0)
        return Plan(
            names, len(self.label), len(self.rows), (max(top, 0), bottom), terms, self.primes, samples
        )


def _attempt(
    draws: Draws, primes: Sequence[int], ring: Ring, degree_limit: int, notes: Notes, number: int
) -> Reconstruction:
    """One reconstruction with the structure taken modulo the first primes that agree."""
    own_ring = ring_of(draws.sampler.variables)
    draws.begin(number)
    outline = notes.kept(
        f"structure {number}", Outline, partial(_outline, draws, primes, degree_limit, own_ring)
    )
    draws.samples = outline.samples
    found, rows = outline.structure(own_ring), np.array(outline.rows, dtype=np.int64)
    exponents, full = universe(found.bounds, found.subsets, found.mixed)
    plan = outline.plan(draws.sampler.variables, max(map(len, full), default=0))
    draws.expected = plan.samples
    draws.watch.plan(plan, draws.samples)
    others = tuple(prime for prime in primes if prime not in outline.front)
    lifted, data_primes, confirmed = coefficients(
        draws, rows, found, exponents, full, outline.front[0], others, outline.primes, notes, number
    )
    entries = _assembled(lifted, found, own_ring, ring)
    used_factors = [item for k, item in enumerate(found.factors) if (found.powers[:, k] > 0).any()]
    return Reconstruction(
        tuple(entries[i] for i in outline.label),
        Evidence(
            samples=draws.samples,
            distinct=len(rows),
            degrees=tuple(outline.degrees[i] for i in outline.label),
            factors=tuple(polynomial_text(item.polynomial) for item in used_factors),
            structure_primes=outline.front,
            data_primes=tuple(data_primes),
            confirmed=tuple(int(confirmed[i]) for i in outline.label),
            points=CONFIRMING_POINTS,
        ),
    )


def _outline(draws: Draws, primes: Sequence[int], degree_limit: int, own_ring: Ring) -> Outline:
    first, second = _agreeing_probes(draws, primes, degree_limit)
    label, rows = equal_rows(np.stack([first.label, second.label], axis=1).astype(np.uint64))
    first, second = _restricted(first, rows), _restricted(second, rows)
    slices = _slices(draws, first, rows, degree_limit)
    front = (first.line.prime, second.line.prime)
    others = tuple(prime for prime in primes if prime not in front)
    found = structure(draws, Probes(rows, first, second, slices, front + others, own_ring))
    subsets, mixed = mixed_bounds(
        draws, front[0], rows, found.factors, found.powers, found.bounds, len(first.line.nodes), degree_limit
    )
    draws.doing = "sizes"
    needed = primes_needed(draws, rows, found.factors, found.powers, found.bounds, (front[0], *others))
    return Outline(
        label=tuple(label.tolist()),
        rows=tuple(rows.tolist()),
        degrees=tuple((above, below) for above, below in first.degrees().tolist()),
        front=front,
        factors=tuple(tuple(plain_terms(item.polynomial).items()) for item in found.factors),
        powers=tuple(map(tuple, found.powers.tolist())),
        bounds=tuple(map(tuple, found.bounds.tolist())),
        subsets=subsets,
        mixed=tuple(map(tuple, mixed.tolist())),
        primes=needed,
        samples=draws.samples,
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
