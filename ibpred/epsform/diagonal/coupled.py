"""Coupled diagonal blocks: Fuchsian form by global sections at numeric eps, then rebuilt in eps."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Any

from ibpred.epsform.blocks import Block, Finding
from ibpred.epsform.diagonal.entries import matrix_of, packed, reduced_entries
from ibpred.epsform.form import Matrix
from ibpred.epsform.lattices.findings import finding
from ibpred.epsform.lattices.image import Pattern, block_pattern, splits
from ibpred.epsform.lattices.intertwine import intertwiners, modular_number, reference_numbers, representative
from ibpred.epsform.lattices.local import Obstacle, Trouble
from ibpred.epsform.lattices.pencil import ModularMatrix, times_constant
from ibpred.epsform.lattices.probe import Probe, Residues, glued_at, letter_residues, probe
from ibpred.epsform.lattices.sampling import Sample, reconstruct_in_eps
from ibpred.epsform.lattices.sections import Glued
from ibpred.epsform.lattices.spectrum import Slopes
from ibpred.epsform.matrices import Constants, inverse, lifted, product
from ibpred.epsform.residues.content import simplified
from ibpred.epsform.residues.decompose import conjugated, decomposed
from ibpred.epsform.verify import canonical_matrix, satisfies
from ibpred.errors import ReconstructionError, UnfinishedError
from ibpred.exact.rational import Rational
from ibpred.progress import SILENT, Progress


@dataclass
class _Reference:
    """Canonical residues modulo each prime, computed when first needed."""

    eps: Fraction
    base: int
    slopes: Slopes
    residues: dict[int, Residues | None] = field(default_factory=dict)


def solve_coupled(
    matrix: Matrix,
    name: str,
    primes: Sequence[int],
    seed: int,
    subject: str,
    progress: Progress = SILENT,
) -> Block | Finding:
    """Epsilon-form of a coupled diagonal block, or the reason why there is none.

    Parameters
    ----------
    matrix
        The block, over Q(eps, x).
    name
        The variable x.
    primes
        For the modular samples; taken in order, those where the letters split.
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
    ring = matrix[0][0].ring
    pattern = block_pattern(matrix, ring, name)
    usable = tuple(p for p in primes if splits(pattern, p))
    if not usable:
        raise ReconstructionError(f"{subject}: the letters split modulo none of the {len(primes)} primes")
    probed = probe(pattern, usable[0], seed, subject)
    if isinstance(probed, Obstacle):
        return finding(probed, pattern.places, name)
    reference = _reference(pattern, usable[0], probed, seed, subject)
    if isinstance(reference, Obstacle):
        return finding(reference, pattern.places, name)
    size = len(matrix)

    def sampler(eps: int, prime: int) -> Sample | None:
        progress.advance(0, None)
        right = _reference_residues(pattern, reference, prime)
        here = glued_at(pattern, (eps,), reference.slopes, prime, reference.base)
        if right is None or not isinstance(here, Glued):
            return None
        left = letter_residues(here, pattern, eps, prime)
        return None if isinstance(left, Obstacle) else _sample(here, left, right, seed)

    rebuilt = reconstruct_in_eps(sampler, usable, seed, ring, subject)
    transformation, residues = _unpacked(rebuilt.shape, rebuilt.functions, pattern, size)
    basis, parts = decomposed(tuple(residues.values()) or (_zero(size),), seed)
    transformation = product(transformation, lifted(ring, basis), ring)
    transformation, change = simplified(transformation, parts, ring)
    residues = {text: conjugated(conjugated(matrices, basis), change) for text, matrices in residues.items()}
    logarithms = {p.text(): p.logarithmic() for p in pattern.places}
    canonical = canonical_matrix(residues, logarithms, size, ring)
    if not satisfies(matrix, transformation, canonical, name, ring):
        raise ReconstructionError(
            f"{subject}: the epsilon-form rebuilt from samples fails the exact check; give larger primes"
        )
    return Block(transformation, inverse(transformation, ring), residues, ((),) * size)


def _zero(size: int) -> Constants:
    return ((Fraction(0),) * size,) * size


def _reference_residues(pattern: Pattern, reference: _Reference, prime: int) -> Residues | None:
    if prime not in reference.residues:
        eps = modular_number(reference.eps, prime)
        here = glued_at(pattern, (eps,), reference.slopes, prime, reference.base)
        found = letter_residues(here, pattern, eps, prime) if isinstance(here, Glued) else None
        reference.residues[prime] = None if isinstance(found, Obstacle) else found
    return reference.residues[prime]


def _reference(pattern: Pattern, prime: int, probed: Probe, seed: int, subject: str) -> _Reference | Obstacle:
    """A reference value of eps that works for all samples; an obstacle if none does."""
    size = len(pattern.numerators)
    block = [range(size)]
    support = tuple(tuple(range(size)) for _ in range(size))
    tried = False
    for number in reference_numbers(probed.slopes):
        reference = _Reference(number, probed.base, probed.slopes)
        right = _reference_residues(pattern, reference, prime)
        if right is None:
            continue
        tried = True
        if not any(
            isinstance(intertwiners(left, right, block, support, seed), range) for left in probed.residues
        ):
            return reference
    if tried:
        return Obstacle(Trouble.CONSTANT, -1, (), ())
    raise UnfinishedError(f"{subject}: every reference value of eps is special")


def _sample(
    here: Glued, left: Sequence[ModularMatrix], right: Sequence[ModularMatrix], seed: int
) -> Sample | None:
    """The entries of T C and the constant residues as a flat list."""
    size = len(here.numerators)
    support = tuple(tuple(range(size)) for _ in range(size))
    basis = intertwiners(left, right, [range(size)], support, seed)
    if isinstance(basis, range):
        return None
    columns = times_constant(here.numerators, representative(basis, seed))
    entries = reduced_entries(columns, here.denominator)
    prime = int(left[0].modulus())
    if len(basis) == 1:
        # the one free factor of eps: fixed where the functions stay simplest
        first = next(c for above, _ in entries for c in above.coeffs() if int(c))
        scale = pow(int(first), -1, prime)
        entries = [(above * scale, below) for above, below in entries]
    shape, values = packed(entries)
    values += [int(e) for matrix in right for row in matrix.tolist() for e in row]
    return Sample(shape, tuple(values))


def _unpacked(
    shape: Any, functions: Sequence[Rational], pattern: Pattern, size: int
) -> tuple[Matrix, Mapping[str, Constants]]:
    """Back from the flat list: T C, and the residues of the letters that occur."""
    ring = pattern.ring
    source = iter(functions)
    rows = matrix_of(shape, source, ring, pattern.name)
    residues: dict[str, Constants] = {}
    for place in pattern.places:
        values = [next(source).to_fraction() for _ in range(size * size)]
        if any(values):
            residues[place.text()] = tuple(tuple(values[i * size : (i + 1) * size]) for i in range(size))
    return rows, residues
