"""The epsilon-factorised form of a differential system."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from itertools import pairwise

from ibpred.epsform.blocks import Block, Finding
from ibpred.epsform.constant import Stuck, factor_eps, fuchsian
from ibpred.epsform.coupled import solve_coupled
from ibpred.epsform.coupled_many import solve_coupled_many
from ibpred.epsform.cover import (
    Cover,
    describe,
    double_cover,
)
from ibpred.epsform.form import Connection, EpsilonForm, Matrix, Obstructed, Obstruction
from ibpred.epsform.matrices import (
    Constants,
    added,
    derivative,
    identity,
    inverse,
    part,
    product,
    subtracted,
    vanishes,
)
from ibpred.epsform.picardfuchs import picard_fuchs
from ibpred.epsform.places import Place, places_of
from ibpred.epsform.single import solve_single
from ibpred.epsform.structure import coupled_blocks, couplings, reachable
from ibpred.epsform.triangular import Grid, eliminate
from ibpred.epsform.verify import verify
from ibpred.errors import ReconstructionError, UnfinishedError
from ibpred.exact.rational import Ring
from ibpred.progress import SILENT, Progress


def factorise(
    connection: Connection, primes: Sequence[int], seed: int, progress: Progress | None = None
) -> EpsilonForm | Obstructed:
    """Bring a system to epsilon-factorised form, or say what is in the way.

    Coupled diagonal blocks by lattices and global sections (see `sections`), the couplings between blocks
    by exact elimination (see `triangular`), then the constant matrix that factors eps out (see `constant`,
    which also says how the functions are normalised). The result is checked by exact substitution.

    Parameters
    ----------
    connection
        In one ratio or several.
    primes
        For the modular samples, of 40 to 50 bits (up to 62 for systems in one ratio); a few dozen, since
        only those are used modulo which the letters of coupled blocks split.
    seed
        Of the sample points.
    progress
        Told about the blocks done.

    Returns
    -------
    outcome
        `Obstructed` is a mathematical finding, not an error: no form exists over functions rational in
        the ratio.

    Raises
    ------
    UnfinishedError
        Where primes and samples do not suffice.
    """
    progress = SILENT if progress is None else progress
    if not connection.variables:
        raise UnfinishedError("a system without ratios has no differential equation to factorise")
    links = couplings(connection)
    solved: dict[tuple[int, ...], Block] = {}
    obstructions: list[Obstruction] = []
    for rows, outcome in diagonal_blocks(connection, primes, seed, progress):
        if isinstance(outcome, Finding):
            outcome = on_cover(outcome, restricted(connection, rows), primes, seed)
            obstructions.append(_obstruction(connection, rows, outcome))
        else:
            solved[rows] = outcome
    blocks = coupled_blocks(links)
    progress.stage("epsilon-form of the couplings")
    reach = reachable(links)
    while True:
        stuck = {row for obstruction in obstructions for row in obstruction.rows}
        free = tuple(block for block in blocks if not reach[block[0]] & stuck)
        if not free:
            return Obstructed(tuple(obstructions), (), None)
        outcome_ = _assembled(connection, free, [solved[block] for block in free], primes, seed)
        if isinstance(outcome_, EpsilonForm):
            break
        rows = free[outcome_.block]
        found = outcome_.finding
        obstructions.append(Obstruction(rows, found.reason, None, found.exponents))
    if not obstructions:
        return outcome_
    return Obstructed(tuple(obstructions), tuple(sorted(i for block in free for i in block)), outcome_)


def diagonal_blocks(
    connection: Connection, primes: Sequence[int], seed: int, progress: Progress
) -> tuple[tuple[tuple[int, ...], Block | Finding], ...]:
    """The sets of rows that depend on each other, each with its epsilon-form or what is in the way."""
    blocks = coupled_blocks(couplings(connection))
    progress.stage("epsilon-form of the diagonal blocks")
    found: list[tuple[tuple[int, ...], Block | Finding]] = []
    for rows in blocks:
        found.append((rows, _solve_block(restricted(connection, rows), primes, seed)))
        progress.advance(len(found), len(blocks))
    return tuple(found)


def _solve_block(block: Connection, primes: Sequence[int], seed: int) -> Block | Finding:
    if len(block.labels) == 1:
        return solve_single({name: block.matrices[name][0][0] for name in block.variables})
    subject = f"block {', '.join(block.labels)}"
    if len(block.variables) > 1:

        def solve(smaller: Connection) -> EpsilonForm | Obstructed:
            return factorise(smaller, primes, seed)

        return solve_coupled_many(block, solve, primes, seed, subject)
    name = block.variables[0]
    return solve_coupled(block.matrices[name], name, primes, seed, subject)


def on_cover(found: Finding, block: Connection, primes: Sequence[int], seed: int) -> Finding:
    """Add to a missing square root what would remove it, and whether the block has a form then."""
    points = found.branch_points
    if not points:
        return found
    reason = f"{found.reason}; {describe(points, block.variables[0])}"
    if len(points) == 2:
        outcome = _solve_block(double_cover(block, points).connection, primes, seed)
        if isinstance(outcome, Finding):
            return Finding(f"{reason}, but even then: {outcome.reason}", found.exponents)
    return Finding(reason, found.exponents, points)


def root_cover(connection: Connection, primes: Sequence[int], seed: int) -> Cover | None:
    """The double cover that removes the first square root with two branch points, if there is one.

    Epsilon-forms on the cover come from `factorise` of its connection; where that needs another root,
    take the cover again.

    Parameters
    ----------
    connection
        In one ratio (for several there is none).
    primes, seed
        As for `factorise`.
    """
    if len(connection.variables) != 1:
        return None
    for _, outcome in diagonal_blocks(connection, primes, seed, SILENT):
        if isinstance(outcome, Finding) and len(outcome.branch_points) == 2:
            return double_cover(connection, outcome.branch_points)
    return None


def _obstruction(connection: Connection, rows: tuple[int, ...], found: Finding) -> Obstruction:
    """With the operator in the first ratio that the block depends on."""
    own = {name: part(connection.matrices[name], rows, rows) for name in connection.variables}
    name = next((n for n in own if not vanishes(own[n])), connection.variables[0])
    return Obstruction(rows, found.reason, picard_fuchs(own[name], name), found.exponents)


def restricted(connection: Connection, rows: Sequence[int]) -> Connection:
    """The closed subsystem of some rows."""
    return Connection(
        connection.variables,
        connection.ring,
        {name: part(matrix, rows, rows) for name, matrix in connection.matrices.items()},
        (1,) * len(rows),
        tuple(connection.labels[i] for i in rows),
    )


def _assembled(
    connection: Connection,
    blocks: Sequence[tuple[int, ...]],
    solved: Sequence[Block],
    primes: Sequence[int],
    seed: int,
) -> EpsilonForm | Stuck:
    """The form of the subsystem made of some blocks, from the forms of the blocks."""
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
    for name in connection.variables:
        letters = _letters(connection, blocks, name)
        grids[name], change = eliminate(grids[name], local, letters, field, name)
        step = added(identity(field, len(order)), _joined(change))
        unipotent = product(unipotent, step, field)
        for other in connection.variables:
            if other != name:
                grids[other] = _cut(_gauged(_joined(grids[other]), step, other, field), ranges)
    system = fuchsian({name: _joined(grid) for name, grid in grids.items()}, ranges, field)
    if isinstance(system, Stuck):
        return system
    factored = factor_eps(system, ranges, [block.inverse for block in solved], primes, seed)
    if isinstance(factored, Stuck):
        return factored
    left = _diagonal([block.transformation for block in solved], field)
    right = _diagonal([block.inverse for block in solved], field)
    transformation = product(product(left, unipotent, field), factored.matrix, field)
    back = product(inverse(factored.matrix, field), product(inverse(unipotent, field), right, field), field)
    place_in = {row: k for k, row in enumerate(order)}
    sort = [place_in[row] for row in sorted(order)]
    form = _form(
        connection,
        part(transformation, sort, sort),
        part(back, sort, sort),
        {text: _permuted(a, sort) for text, a in factored.residues.items()},
        system.places,
    )
    if not verify(restricted(connection, sorted(order)), form):
        raise ReconstructionError(
            "the epsilon-form fails the exact check by substitution; give larger primes and another seed"
        )
    return form


def _form(
    connection: Connection,
    transformation: Matrix,
    back: Matrix,
    residues: Mapping[str, Constants],
    places: Sequence[Place],
) -> EpsilonForm:
    letters = [p for p in places if any(v for row in residues[p.text()] for v in row)]
    return EpsilonForm(
        connection.variables,
        connection.ring,
        tuple(p.element for p in letters),
        tuple(residues[p.text()] for p in letters),
        transformation,
        back,
        ((),) * len(transformation),
    )


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


def _permuted(matrix: Constants, order: Sequence[int]) -> tuple[tuple[Fraction, ...], ...]:
    return tuple(tuple(matrix[i][j] for j in order) for i in order)
