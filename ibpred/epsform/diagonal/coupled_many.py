"""Coupled diagonal blocks in several ratios.

On the line of the first ratio x the change of basis T is normalised to one at a base point x = O, for all
values of eps and of the other ratios y. Restricted to x = O the block is a system in y alone; if C(y)
brings that to epsilon-form, ``T C`` does it for the whole block, since T(O) = 1 leaves nothing but a
function of y, and the canonical functions restricted to x = O are canonical for the restricted system.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Protocol

import flint
import numpy as np
from numpy.typing import NDArray

from ibpred.epsform.blocks import Block, Finding
from ibpred.epsform.diagonal.coupled import matrix_of, reduced_entries
from ibpred.epsform.form import Connection, EpsilonForm, Matrix, Obstructed
from ibpred.epsform.lattices.findings import finding
from ibpred.epsform.lattices.image import Pattern, block_pattern, splits
from ibpred.epsform.lattices.local import Obstacle
from ibpred.epsform.lattices.pencil import times_constant
from ibpred.epsform.lattices.probe import Probe, glued_at, letter_residues, probe
from ibpred.epsform.lattices.sections import Glued
from ibpred.epsform.matrices import derivative, identity, inverse, product, subtracted
from ibpred.epsform.residues.constant import factor_eps
from ibpred.epsform.residues.content import simplified
from ibpred.epsform.residues.decompose import conjugated
from ibpred.epsform.residues.fuchsian import Stuck, fuchsian
from ibpred.epsform.roots.tags import Tag, between_functions
from ibpred.errors import ReconstructionError
from ibpred.exact.rational import Rational, Ring, ring
from ibpred.progress import SILENT, Progress
from ibpred.reconstruct.functions import reconstruct
from ibpred.reconstruct.modular import LARGEST_BITS
from ibpred.reconstruct.sampling import Sampler, UnluckyPrimeError

Solver = Callable[[Connection], EpsilonForm | Obstructed]
Shape = tuple[tuple[int, int], ...]
_LINES = 24
"""Seeds that are tried for the lines of a reconstruction."""
LANES = 8
"""Samples that settle the degrees in x."""


class HasCoefficients(Protocol):
    """A matrix as a black box in the parameters."""

    @property
    def variables(self) -> tuple[str, ...]:
        """The parameters."""

    def coefficients(self, values: Sequence[int], prime: int) -> tuple[Shape, list[int]] | None:
        """Degrees and coefficients in x of the entries; None where the point is useless."""


@dataclass(frozen=True)
class _Columns:
    """The entries of T C as a black box in the parameters: their coefficients in x."""

    pattern: Pattern
    probed: Probe
    restricted: Matrix
    shape: Shape | None
    progress: Progress

    @property
    def variables(self) -> tuple[str, ...]:
        return self.pattern.parameters

    @property
    def entries(self) -> int:
        return sum(a + b + 2 for a, b in self.shape or ())

    def coefficients(self, values: Sequence[int], prime: int) -> tuple[Shape, list[int]] | None:
        """Degrees and coefficients at one point; None where the point is useless."""
        self.progress.advance(0, None)
        here = glued_at(self.pattern, values, self.probed.slopes, prime, self.probed.base)
        if not isinstance(here, Glued):
            return None
        if isinstance(letter_residues(here, self.pattern, values[0], prime), Obstacle):
            return None
        size = len(here.numerators)
        try:
            flat = [e.modular(values, prime) if e else 0 for row in self.restricted for e in row]
        except ZeroDivisionError:
            return None
        columns = times_constant(here.numerators, flint.nmod_mat(size, size, flat, prime))
        entries = reduced_entries(columns, here.denominator)
        shape = tuple((above.degree(), below.degree()) for above, below in entries)
        return shape, [int(c) for above, below in entries for c in (*above.coeffs(), *below.coeffs())]

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


def solve_coupled_many(
    block: Connection,
    solve: Solver,
    primes: Sequence[int],
    seed: int,
    subject: str,
    progress: Progress = SILENT,
) -> Block | Finding:
    """Epsilon-form of a coupled block in several ratios, or the reason why there is none.

    Parameters
    ----------
    block
        The block as a system of its own.
    solve
        Finds the epsilon-form of a system with fewer ratios.
    primes
        Of 40 to 50 bits (those of the multivariate reconstruction).
    seed
        Of the sample points.
    subject
        For messages.
    progress
        Told about each sample.

    Raises
    ------
    ReconstructionError
        If primes or samples do not suffice.
    """
    name, field = block.variables[0], block.ring
    pattern = block_pattern(block.matrices[name], field, name)
    usable = tuple(p for p in primes if p.bit_length() <= LARGEST_BITS and splits(pattern, p))
    if not usable:
        raise ReconstructionError(
            f"{subject}: the letters split modulo none of the {len(primes)} primes of at most "
            f"{LARGEST_BITS} bits; give more primes"
        )
    probed = probe(pattern, usable[0], seed, subject)
    if isinstance(probed, Obstacle):
        return finding(probed, pattern.places, name)
    rest = ring(n for n in field.names if n != name)
    matrices = {
        other: tuple(tuple(e.substitute({name: probed.base}).to_ring(rest) for e in row) for row in matrix)
        for other, matrix in block.matrices.items()
        if other != name
    }
    outcome = solve(Connection(block.variables[1:], rest, matrices, block.blocks, block.labels))
    if isinstance(outcome, Obstructed):
        reason = f"on the line {name} = {probed.base}: {outcome.obstructions[0].reason}"
        return Finding(reason, outcome.obstructions[0].exponents)
    if len(set(outcome.tags)) > 1:
        roots = ", ".join(f"sqrt({root})" for root in outcome.radicands)
        letters = tuple(root.to_ring(field) for root in outcome.radicands)
        return Finding(
            f"on the line {name} = {probed.base} functions of one block carry different square roots, made "
            f"of {roots}: variables in which they are rational are needed",
            (),
            roots=letters,
        )
    tag = tuple(outcome.radicands[k].to_ring(field) for k in outcome.tags[0])
    columns = _Columns(pattern, probed, outcome.transformation, None, progress)
    columns = _Columns(
        pattern, probed, outcome.transformation, usual_shape(columns, usable[0], seed, subject), progress
    )
    rebuilt = rebuilt_entries(columns, usable, seed, rest)
    coefficients = iter([entry.to_ring(field) for entry in rebuilt])
    transformation = matrix_of(columns.shape or (), coefficients, field, name)
    return finished(block, transformation, (tag,) * len(transformation), primes, seed)


def usual_shape(columns: HasCoefficients, prime: int, seed: int, subject: str) -> Shape:
    """Degrees in x of the entries at generic parameters."""
    random = np.random.default_rng(seed)
    found: list[Shape] = []
    for _ in range(20 * LANES):
        values = [int(v) for v in random.integers(2, prime, size=len(columns.variables))]
        sample = columns.coefficients(values, prime)
        if sample is not None:
            found.append(sample[0])
        if len(found) == LANES:
            return max(found, key=found.count)
    raise ReconstructionError(f"{subject}: too few points at which its poles have roots modulo the prime")


def rebuilt_entries(columns: Sampler, primes: Sequence[int], seed: int, field: Ring) -> tuple[Rational, ...]:
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
            return reconstruct(columns, primes, seed + attempt, field).entries
        except UnluckyPrimeError:
            continue
    return reconstruct(columns, primes, seed + _LINES - 1, field).entries


def transformed(block: Connection, transformation: Matrix) -> dict[str, Matrix]:
    """The matrices of the block in another basis: ``T^-1 (A T - dT/dx)``."""
    field, back = block.ring, inverse(transformation, block.ring)
    return {
        name: product(
            back,
            subtracted(product(matrix, transformation, field), derivative(transformation, name)),
            field,
        )
        for name, matrix in block.matrices.items()
    }


def finished(
    block: Connection, transformation: Matrix, tags: Sequence[Tag], primes: Sequence[int], seed: int
) -> Block | Finding:
    """Factor eps out of the Fuchsian form that a change of basis leads to.

    Parameters
    ----------
    block
        The block.
    transformation
        The change of basis to functions without their roots.
    tags
        The root of each function; functions with equal roots follow each other.
    primes, seed
        For the modular samples.
    """
    field: Ring = block.ring
    size = len(transformation)
    rows = [range(size)]
    matrices = {
        name: between_functions(m, tags, name, field)
        for name, m in transformed(block, transformation).items()
    }
    system = fuchsian(matrices, rows, tags, field, primes[0], seed)
    if isinstance(system, Stuck):
        return system.finding
    factored = factor_eps(system, rows, [identity(field, size)], tags, primes, seed)
    if isinstance(factored, Stuck):
        return factored.finding
    parts = [range(tags.index(tag), tags.index(tag) + tags.count(tag)) for tag in dict.fromkeys(tags)]
    whole, change = simplified(product(transformation, factored.matrix, field), parts, field)
    residues = {text: conjugated(a, change) for text, a in factored.residues.items()}
    nonzero = {text: a for text, a in residues.items() if any(v for row in a for v in row)}
    return Block(whole, inverse(whole, field), nonzero, tuple(tags))
