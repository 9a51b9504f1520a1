"""Coupled diagonal blocks in several ratios.

On the line of the first ratio x the change of basis T is normalised to one at a base point x = O, for all
values of eps and of the other ratios y. Restricted to x = O the block is a system in y alone; if C(y)
brings that to epsilon-form, ``T C`` does it for the whole block, since T(O) = 1 leaves nothing but a
function of y, and the canonical functions restricted to x = O are canonical for the restricted system.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence

import flint

from ibpred.epsform.blocks import Block, Finding
from ibpred.epsform.diagonal.entries import Entry, rebuilt_matrix, reduced_entries
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
from ibpred.exact.rational import Ring, ring
from ibpred.progress import SILENT, Progress
from ibpred.reconstruct.modular import LARGEST_BITS

Solver = Callable[[Connection], EpsilonForm | Obstructed]


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
    restricted = outcome.transformation

    def image(values: Sequence[int], prime: int) -> Sequence[Entry] | None:
        return _columns(pattern, probed, restricted, values, prime)

    transformation = rebuilt_matrix(image, name, field, usable, seed, subject, progress)
    return finished(block, transformation, (tag,) * len(transformation), primes, seed)


def _columns(
    pattern: Pattern, probed: Probe, restricted: Matrix, values: Sequence[int], prime: int
) -> Sequence[Entry] | None:
    """The entries of T C at one point of the parameters; None where the point is useless."""
    here = glued_at(pattern, values, probed.slopes, prime, probed.base)
    if not isinstance(here, Glued):
        return None
    if isinstance(letter_residues(here, pattern, values[0], prime), Obstacle):
        return None
    size = len(here.numerators)
    try:
        flat = [e.modular(values, prime) if e else 0 for row in restricted for e in row]
    except ZeroDivisionError:
        return None
    columns = times_constant(here.numerators, flint.nmod_mat(size, size, flat, prime))
    return reduced_entries(columns, here.denominator)


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
