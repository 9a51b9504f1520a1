"""From the epsilon-forms of the diagonal blocks to that of the whole system."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise

from ibpred.epsform.blocks import Block
from ibpred.epsform.couplings.triangular import Grid, eliminate
from ibpred.epsform.form import Connection, EpsilonForm, Matrix
from ibpred.epsform.matrices import (
    Constants,
    added,
    derivative,
    identity,
    inverse,
    part,
    product,
    subtracted,
)
from ibpred.epsform.places import Place, places_of
from ibpred.epsform.residues.constant import factor_eps
from ibpred.epsform.residues.fuchsian import Stuck, fuchsian
from ibpred.epsform.roots.oddpart import OddTerms, odd_part, with_roots
from ibpred.epsform.roots.tags import between_functions
from ibpred.epsform.structure import restricted
from ibpred.epsform.verify import verify
from ibpred.errors import ReconstructionError
from ibpred.exact.rational import Ring
from ibpred.progress import SILENT, Progress


def assembled(
    connection: Connection,
    blocks: Sequence[tuple[int, ...]],
    solved: Sequence[Block],
    primes: Sequence[int],
    seed: int,
    progress: Progress = SILENT,
) -> EpsilonForm | Stuck:
    """The form of the subsystem made of some blocks, from the forms of the blocks.

    Parameters
    ----------
    connection
        The whole system.
    blocks
        The rows of each block, each block after those that it depends on.
    solved
        Their forms.
    primes, seed
        For the modular samples.
    progress
        Told about the couplings done, variable by variable and row by row.

    Returns
    -------
    outcome
        `Stuck` names the first block whose couplings have no epsilon-form.

    Raises
    ------
    ReconstructionError
        If the result fails the check by substitution.
    """
    field = connection.ring
    order = [i for block in blocks for i in block]
    starts = [sum(len(b) for b in blocks[:k]) for k in range(len(blocks) + 1)]
    ranges = [range(a, b) for a, b in pairwise(starts)]
    grids = {
        name: _diagonalised(connection.matrices[name], blocks, solved, field, name)
        for name in connection.variables
    }
    unipotent = identity(field, len(order))
    local = [block.residues for block in solved]
    tags = [block.tags for block in solved]
    by_row = [tag for own in tags for tag in own]
    for name in connection.variables:
        letters = _letters(connection, blocks, name)
        grids[name], change = eliminate(grids[name], local, letters, tags, field, name, progress)
        step = added(identity(field, len(order)), _joined(change))
        unipotent = product(unipotent, step, field)
        progress.advance(len(blocks), len(blocks))
        for other in connection.variables:
            if other != name:
                grids[other] = _cut(_gauged(_joined(grids[other]), step, other, field), ranges)
    progress.stage("epsilon-form of the couplings: constant matrix")
    coupled = {name: between_functions(_joined(grid), by_row, name, field) for name, grid in grids.items()}
    system = fuchsian(coupled, ranges, by_row, field, primes[0], seed)
    if isinstance(system, Stuck):
        return system
    progress.advance(1, None)
    factored = factor_eps(system, ranges, [block.inverse for block in solved], by_row, primes, seed)
    if isinstance(factored, Stuck):
        return factored
    progress.advance(2, None)
    odd = odd_part(coupled, factored.matrix, by_row, system.places, field, primes, seed)
    if not isinstance(odd, OddTerms):
        row, finding = odd
        return Stuck(next(k for k, rows in enumerate(ranges) if row in rows), finding)
    progress.stage("epsilon-form: substitution")
    left = _diagonal([block.transformation for block in solved], field)
    right = _diagonal([block.inverse for block in solved], field)
    transformation = product(product(left, unipotent, field), factored.matrix, field)
    back = product(inverse(factored.matrix, field), product(inverse(unipotent, field), right, field), field)
    place_in = {row: k for k, row in enumerate(order)}
    sort = [place_in[row] for row in sorted(order)]
    even = [p for p in system.places if any(v for row in factored.residues[p.text()] for v in row)]
    form = with_roots(
        EpsilonForm(
            connection.variables,
            field,
            tuple(p.element for p in even),
            tuple(_permuted(factored.residues[p.text()], sort) for p in even),
            part(transformation, sort, sort),
            part(back, sort, sort),
            ((),) * len(order),
        ),
        [odd.tags[k] for k in sort],
        [(roots, letter, _permuted(matrix, sort)) for roots, letter, matrix in odd.terms],
    )
    if not verify(restricted(connection, sorted(order)), form):
        raise ReconstructionError(
            "the epsilon-form fails the exact check by substitution; give larger primes and another seed"
        )
    return form


def _letters(connection: Connection, blocks: Sequence[tuple[int, ...]], name: str) -> dict[str, Place]:
    matrix = connection.matrices[name]
    entries = [matrix[i][j] for block in blocks for i in block for j in block]
    return {place.text(): place for place in places_of(entries, connection.ring, name)}


def _diagonalised(
    matrix: Matrix, blocks: Sequence[tuple[int, ...]], solved: Sequence[Block], ring: Ring, name: str
) -> Grid:
    """The system cut into blocks, in the basis of the blocks' epsilon-forms."""
    grid: Grid = []
    for i, rows in enumerate(blocks):
        line: list[Matrix] = []
        for j, columns in enumerate(blocks):
            own = part(matrix, rows, columns)
            if any(e for row in own for e in row):
                own = product(product(solved[i].inverse, own, ring), solved[j].transformation, ring)
            if i == j:
                slope = tuple(tuple(e.derivative(name) for e in row) for row in solved[i].transformation)
                own = subtracted(own, product(solved[i].inverse, slope, ring))
            line.append(own)
        grid.append(line)
    return grid


def _gauged(matrix: Matrix, step: Matrix, name: str, ring: Ring) -> Matrix:
    """``S^-1 (A S - dS/dx)``."""
    whole = subtracted(product(matrix, step, ring), derivative(step, name))
    return product(inverse(step, ring), whole, ring)


def _cut(matrix: Matrix, ranges: Sequence[range]) -> Grid:
    return [[part(matrix, rows, columns) for columns in ranges] for rows in ranges]


def _joined(grid: Grid) -> Matrix:
    rows: list[tuple[object, ...]] = []
    for line in grid:
        rows.extend(tuple(e for block in line for e in block[k]) for k in range(len(line[0])))
    return tuple(rows)  # type: ignore[arg-type]


def _diagonal(blocks: Sequence[Matrix], ring: Ring) -> Matrix:
    size = sum(map(len, blocks))
    rows, start = [], 0
    for block in blocks:
        for row in block:
            rows.append((*(ring.zero,) * start, *row, *(ring.zero,) * (size - start - len(block))))
        start += len(block)
    return tuple(rows)


def _permuted(matrix: Constants, order: Sequence[int]) -> Constants:
    return tuple(tuple(matrix[i][j] for j in order) for i in order)
