"""Functions of eps over Q from samples at numeric eps modulo primes."""

from __future__ import annotations

from collections.abc import Callable, Hashable, Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import lcm
from random import Random

import flint

from ibpred.errors import ReconstructionError
from ibpred.exact.rational import Rational, Ring
from ibpred.reconstruct.lift import chinese_remainder, rational_number
from ibpred.reconstruct.univariate import Fraction_, rational_function

FIRST_COUNTS = (6, 9, 14, 20, 30, 44, 64, 96, 140, 200, 300)
"""Numbers of samples tried in turn at the first prime."""
PATIENCE = 12
"""Useless samples in a row after which a prime is given up."""


@dataclass(frozen=True)
class Sample:
    """Values at one eps, with the shape they belong to (degrees; must agree between samples)."""

    shape: Hashable
    values: tuple[int, ...]


Sampler = Callable[[int, int], "Sample | None"]
"""(eps, prime) -> sample, or None where this eps is useless."""
Shape = tuple[tuple[int, int], ...]


@dataclass(frozen=True)
class Reconstructed:
    """The functions of eps, and the shape of the samples they come from."""

    shape: Hashable
    functions: tuple[Rational, ...]


def reconstruct_in_eps(
    sampler: Sampler, primes: Sequence[int], seed: int, ring: Ring, subject: str
) -> Reconstructed:
    """Find the functions of eps behind a sampler.

    Parameters
    ----------
    sampler
        Values at numeric eps modulo a prime.
    primes
        Taken in order until the rational coefficients are stable.
    seed
        Of the sample points.
    ring
        Where the results live; has a variable ``eps``.
    subject
        For messages.

    Raises
    ------
    ReconstructionError
        If primes or samples do not suffice.
    """
    random = Random(seed)
    residues: list[int] | None = None
    modulus = 1
    shape: tuple[Hashable, Shape] | None = None
    for prime in primes:
        found = _at_prime(sampler, prime, random, shape, subject)
        if found is None:
            continue
        new_shape, coefficients = found
        if shape is not None and new_shape != shape:
            continue
        shape = new_shape
        residues = (
            coefficients if residues is None else chinese_remainder(residues, modulus, coefficients, prime)
        )
        modulus *= prime
        numbers = []
        for residue in residues:
            number = rational_number(residue, modulus)
            if number is None:
                break
            numbers.append(Fraction(*number))
        else:
            return Reconstructed(shape[0], _assembled(shape[1], numbers, ring))
    raise ReconstructionError(
        f"{subject}: {len(primes)} primes did not determine the coefficients as functions of eps; "
        "give more primes"
    )


def _stream(sampler: Sampler, prime: int, random: Random) -> Iterator[tuple[int, Sample]]:
    """Samples at fresh points of one prime, until too many in a row are useless."""
    used: set[int] = set()
    failures = 0
    while failures < PATIENCE:
        eps = random.randrange(2, prime)
        if eps in used:
            continue
        used.add(eps)
        sample = sampler(eps, prime)
        if sample is None:
            failures += 1
        else:
            failures = 0
            yield eps, sample


def _at_prime(
    sampler: Sampler, prime: int, random: Random, known: tuple[Hashable, Shape] | None, subject: str
) -> tuple[tuple[Hashable, Shape], list[int]] | None:
    """Degrees and coefficients modulo one prime; None where the prime is useless."""
    counts: Sequence[int] = FIRST_COUNTS
    if known is not None:
        counts = (max((n + d for n, d in known[1]), default=0) + 4,)
    groups: dict[Hashable, list[tuple[int, Sample]]] = {}
    stream = _stream(sampler, prime, random)
    for count in counts:
        while max(map(len, groups.values()), default=0) < count:
            item = next(stream, None)
            if item is None:
                return None
            groups.setdefault(item[1].shape, []).append(item)
        shape, group = max(groups.items(), key=lambda entry: len(entry[1]))
        fractions = _rational_functions(group, prime)
        if fractions is not None:
            degrees = tuple((n.degree(), d.degree()) for n, d in fractions)
            values = [int(c) for n, d in fractions for c in (*n.coeffs(), *d.coeffs())]
            return (shape, degrees), values
    if known is not None:
        return None
    raise ReconstructionError(
        f"{subject}: {counts[-1]} samples in eps do not determine its degree in eps; "
        "choose masters whose differential equation is simpler"
    )


def _rational_functions(group: Sequence[tuple[int, Sample]], prime: int) -> list[Fraction_] | None:
    nodes = [eps for eps, _ in group]
    size = len(nodes)
    powers = []
    for node in nodes:
        row = [1]
        for _ in range(size - 1):
            row.append(row[-1] * node % prime)
        powers.extend(row)
    vandermonde = flint.nmod_mat(size, size, powers, prime)
    rows = [sample.values for _, sample in group]
    width = len(rows[0])
    values = flint.nmod_mat(size, width, [v for row in rows for v in row], prime)
    images = vandermonde.solve(values).transpose().tolist() if width else []
    modulus = flint.nmod_poly([1], prime)
    for node in nodes:
        modulus = modulus * flint.nmod_poly([-node % prime, 1], prime)
    found = []
    for image in images:
        fraction = rational_function(modulus, flint.nmod_poly([int(c) for c in image], prime))
        if fraction is None:
            return None
        found.append(fraction)
    return found


def _assembled(degrees: Shape, numbers: Sequence[Fraction], ring: Ring) -> tuple[Rational, ...]:
    index = ring.index("eps")
    source = iter(numbers)

    def polynomial(degree: int) -> Rational:
        terms: dict[tuple[int, ...], int] = {}
        values = [next(source) for _ in range(degree + 1)]
        scale = lcm(*(value.denominator for value in values))
        for power, value in enumerate(values):
            if value:
                exponents = [0] * len(ring.names)
                exponents[index] = power
                terms[tuple(exponents)] = value.numerator * (scale // value.denominator)
        return ring.fraction(ring.context.from_dict(terms), ring.context.constant(scale))

    found = []
    for above, below in degrees:
        top = polynomial(above)
        found.append(top / polynomial(below))
    return tuple(found)
