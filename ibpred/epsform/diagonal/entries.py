"""A matrix over Q(x, parameters) from the modular images of its entries at points of the parameters."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, replace
from math import isqrt

import numpy as np
from numpy.typing import NDArray

from ibpred.epsform.form import Matrix
from ibpred.epsform.lattices.pencil import ModularPolynomial, PolynomialMatrix
from ibpred.errors import ReconstructionError
from ibpred.exact.rational import Rational, Ring, ring
from ibpred.progress import Progress
from ibpred.reconstruct.functions import reconstruct
from ibpred.reconstruct.sampling import UnluckyPrimeError

Entry = tuple[ModularPolynomial, ModularPolynomial]
"""Numerator and monic denominator in x, reduced."""

Shape = tuple[tuple[int, int], ...]
"""Their degrees, entry by entry."""

_LINES = 24  # seeds that are tried for the lines of a reconstruction
_LANES = 8  # samples that settle the degrees in x


def reduced_entries(numerators: PolynomialMatrix, denominator: ModularPolynomial) -> list[Entry]:
    """The entries row by row as reduced fractions with monic denominators."""
    entries = []
    for entry in (e for row in numerators for e in row):
        common = entry.gcd(denominator)
        below = denominator // common
        lead = below.leading_coefficient()
        entries.append((entry // common / lead, below / lead))
    return entries


def matrix_of(
    shape: Sequence[tuple[int, int]], coefficients: Iterator[Rational], ring: Ring, name: str
) -> Matrix:
    """The inverse of `reduced_entries` for a square matrix: fractions in x from their coefficients."""
    x = ring.variable(name)

    def polynomial(degree: int) -> Rational:
        total = ring.zero
        for power in range(degree + 1):
            total = total + next(coefficients) * x**power
        return total

    entries = []
    for above, below in shape:
        top = polynomial(above)
        entries.append(top / polynomial(below))
    size = isqrt(len(entries))
    return tuple(tuple(entries[i * size : (i + 1) * size]) for i in range(size))


def packed(entries: Sequence[Entry]) -> tuple[Shape, list[int]]:
    """Degrees and coefficients of entries, in the order in which `matrix_of` takes them."""
    shape = tuple((above.degree(), below.degree()) for above, below in entries)
    return shape, [int(c) for above, below in entries for c in (*above.coeffs(), *below.coeffs())]


@dataclass(frozen=True)
class EntrySampler:
    """The coefficients in x of a matrix's entries as a black box in the parameters.

    Attributes
    ----------
    variables
        The parameters.
    image
        The entries at a point of the parameters modulo a prime; None where the point is useless.
    shape
        The degrees at generic points.
    progress
        Told about each sample.
    """

    variables: tuple[str, ...]
    image: Callable[[Sequence[int], int], Sequence[Entry] | None]
    shape: Shape
    progress: Progress

    @property
    def entries(self) -> int:
        """The number of coefficients."""
        return sum(a + b + 2 for a, b in self.shape)

    def coefficients(self, values: Sequence[int], prime: int) -> tuple[Shape, list[int]] | None:
        """Degrees and coefficients at one point; None where the point is useless."""
        self.progress.advance(0, None)
        found = self.image(values, prime)
        return None if found is None else packed(found)

    def __call__(
        self, points: NDArray[np.uint64], prime: int
    ) -> tuple[NDArray[np.uint64], NDArray[np.bool_]]:
        count = points.shape[1]
        values = np.zeros((self.entries, count), dtype=np.uint64)
        good = np.zeros(count, dtype=np.bool_)
        for lane in range(count):
            found = self.coefficients([int(v) for v in points[:, lane]], prime)
            if found is not None and found[0] == self.shape:
                values[:, lane] = found[1]
                good[lane] = True
        return values, good


def rebuilt_matrix(
    image: Callable[[Sequence[int], int], Sequence[Entry] | None],
    name: str,
    field: Ring,
    primes: Sequence[int],
    seed: int,
    subject: str,
    progress: Progress,
) -> Matrix:
    """A square matrix over Q(x, parameters).

    Parameters
    ----------
    image
        As for `EntrySampler`.
    name
        The variable x.
    field
        The matrix's ring; all its other variables are parameters, in this order.
    primes, seed
        For the samples.
    subject
        For messages.
    progress
        Told about each sample.

    Raises
    ------
    ReconstructionError
        If primes or samples do not suffice.
    """
    parameters = tuple(n for n in field.names if n != name)
    sampler = EntrySampler(parameters, image, (), progress)
    sampler = replace(sampler, shape=_usual_shape(sampler, primes[0], seed, subject))
    rebuilt = _rebuilt(sampler, primes, seed, ring(parameters))
    return matrix_of(sampler.shape, iter([entry.to_ring(field) for entry in rebuilt]), field, name)


def _usual_shape(sampler: EntrySampler, prime: int, seed: int, subject: str) -> Shape:
    """Degrees in x of the entries at generic parameters."""
    random = np.random.default_rng(seed)
    found: list[Shape] = []
    for _ in range(20 * _LANES):
        values = [int(v) for v in random.integers(2, prime, size=len(sampler.variables))]
        sample = sampler.coefficients(values, prime)
        if sample is not None:
            found.append(sample[0])
        if len(found) == _LANES:
            return max(found, key=found.count)
    raise ReconstructionError(f"{subject}: too few points at which its poles have roots modulo the prime")


def _rebuilt(sampler: EntrySampler, primes: Sequence[int], seed: int, field: Ring) -> tuple[Rational, ...]:
    """The coefficients as functions of the parameters.

    Where letters of degree two and more have no roots modulo the prime at some value of a parameter, no
    sample on a line with that value is of use; other lines are then taken.

    Raises
    ------
    ReconstructionError
        If primes or samples do not suffice.
    """
    for attempt in range(_LINES - 1):
        try:
            return reconstruct(sampler, primes, seed + attempt, field).entries
        except UnluckyPrimeError:
            continue
    return reconstruct(sampler, primes, seed + _LINES - 1, field).entries
