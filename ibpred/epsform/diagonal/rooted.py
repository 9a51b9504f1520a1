"""Coupled blocks whose functions carry different square roots.

As in `coupled_many`, the change of basis is found on the line of the first variable x and fixed at a base
point x = O, now separately for the functions of each root (see `characters`). What is left is a function of
the other variables that does not mix the roots; it is found on x = O, where the functions differ by their
roots still.
"""

from __future__ import annotations

from collections.abc import Sequence

from ibpred.epsform.blocks import Block, Finding
from ibpred.epsform.diagonal.characters import Characters, characters, normal_columns
from ibpred.epsform.diagonal.coupled_many import Solver, finished, transformed
from ibpred.epsform.diagonal.entries import Entry, rebuilt_matrix, reduced_entries
from ibpred.epsform.form import Connection, EpsilonForm, Matrix, Obstructed
from ibpred.epsform.lattices.image import splits
from ibpred.epsform.matrices import identity, product
from ibpred.epsform.roots.conics import as_element, without_squares
from ibpred.epsform.roots.tags import Tag, canonical, product_of
from ibpred.exact.rational import Rational, ring
from ibpred.progress import SILENT, Progress
from ibpred.reconstruct.modular import LARGEST_BITS


def solve_rooted(
    block: Connection,
    found: Finding,
    solve: Solver,
    primes: Sequence[int],
    seed: int,
    subject: str,
    progress: Progress = SILENT,
) -> Block | Finding:
    """Epsilon-form of a coupled block that lacks square roots, its functions with roots of their own.

    Parameters
    ----------
    block
        The block as a system of its own.
    found
        Why it has no form with a common root; it names the letters under the roots.
    solve
        Finds the epsilon-form of a system with fewer variables.
    primes, seed, subject, progress
        As for `ibpred.epsform.diagonal.coupled_many.solve_coupled_many`.

    Returns
    -------
    outcome
        The same finding where roots of these letters do not help.

    Raises
    ------
    ReconstructionError
        If primes or samples do not suffice.
    """
    name, field = block.variables[0], block.ring
    small = tuple(p for p in primes if p.bit_length() <= LARGEST_BITS)
    roots = characters(block, name, found.roots, small, seed) if small else None
    if roots is None:
        return found
    usable = tuple(p for p in small if all(splits(character.pattern, p) for character in roots.found))
    if not usable:
        return found
    known = roots

    def image(values: Sequence[int], prime: int) -> Sequence[Entry] | None:
        return _columns(known, values, prime)

    transformation = rebuilt_matrix(image, name, field, usable, seed, subject, progress)
    tags = [character.tag for character in roots.found for _ in character.rows]
    if len(block.variables) > 1:
        rest = ring(n for n in field.names if n != name)
        moved = transformed(block, transformation)
        matrices = {
            other: tuple(tuple(e.substitute({name: roots.base}).to_ring(rest) for e in row) for row in matrix)
            for other, matrix in moved.items()
            if other != name
        }
        outcome = solve(Connection(block.variables[1:], rest, matrices, block.blocks, block.labels))
        if isinstance(outcome, Obstructed):
            reason = f"on the line {name} = {roots.base}: {outcome.obstructions[0].reason}"
            return Finding(reason, outcome.obstructions[0].exponents)
        completed = _completed(outcome, tags, name, roots.base, block)
        if completed is None:
            return Finding(f"on the line {name} = {roots.base} functions with different square roots mix", ())
        change, tags = completed
        transformation = product(transformation, change, field)
    order = sorted(range(len(tags)), key=lambda k: (tags.index(tags[k]), k))
    sort = tuple(tuple(identity(field, len(tags))[i][k] for k in order) for i in range(len(tags)))
    return finished(block, product(transformation, sort, field), tuple(tags[k] for k in order), primes, seed)


def _columns(block: Characters, values: Sequence[int], prime: int) -> Sequence[Entry] | None:
    """The entries of T at one point of the parameters; None where the point is useless."""
    parts = []
    for character in block.found:
        columns = normal_columns(character, values, prime, block)
        if columns is None:
            return None
        flat = reduced_entries(*columns)
        width = len(character.rows)
        parts.append([flat[k : k + width] for k in range(0, len(flat), width)])
    return [entry for row in zip(*parts, strict=True) for own in row for entry in own]


def _completed(
    outcome: EpsilonForm, tags: Sequence[Tag], name: str, base: int, block: Connection
) -> tuple[Matrix, list[Tag]] | None:
    """What remains to be done on x = O, and the tags of the functions; None if it mixes roots."""
    field, size = block.ring, len(tags)
    rows = [[field.zero] * size for _ in range(size)]
    found: list[Tag] = []
    for j, own in enumerate(outcome.tags):
        classes = {tags[i] for i in range(size) if outcome.transformation[i][j]}
        if len(classes) != 1:
            return None
        (tag,) = classes
        line = product_of(tag, field).substitute({name: base})
        here = product_of([outcome.radicands[k].to_ring(field) for k in own], field)
        # f = sqrt(here) g on the line, and sqrt(tag * rest) g' everywhere, with here * line * rest a square
        rest = _letters(without_squares(here * line))
        scale = _root_of(line * product_of(rest, field) / here)
        for i in range(size):
            value = outcome.transformation[i][j]
            if value:
                rows[i][j] = value.to_ring(field) * scale
        found.append(canonical((*tag, *rest)))
    return tuple(map(tuple, rows)), found


def _letters(value: Rational) -> Tag:
    return canonical([as_element(factor, value.ring) for factor, _ in value.factors()[1]])


def _root_of(square: Rational) -> Rational:
    """The square root, up to a number."""
    root = square.ring.one
    for factor, power in square.factors()[1]:
        root = root * as_element(factor, square.ring) ** (power // 2)
    return root
