"""The epsilon-factorised form of a differential system in one ratio."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from itertools import pairwise

from ibpred.epsform.blocks import Block, Finding
from ibpred.epsform.constant import Stuck, factor_eps, fuchsian
from ibpred.epsform.coupled import solve_coupled
from ibpred.epsform.form import Connection, EpsilonForm, Matrix, Obstructed, Obstruction
from ibpred.epsform.matrices import Constants, identity, inverse, part, product, subtracted
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
        In one ratio.
    primes
        For the modular samples, of about 50 to 62 bits; a few dozen, since only those are used modulo
        which the letters of coupled blocks split.
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
        For several ratios (not supported yet), or where primes and samples do not suffice.
    """
    progress = SILENT if progress is None else progress
    if len(connection.variables) != 1:
        raise UnfinishedError(
            f"the epsilon-form is found for one ratio; this system has {len(connection.variables)}: "
            f"{', '.join(connection.variables) or 'none'}"
        )
    name = connection.variables[0]
    links = couplings(connection)
    blocks = coupled_blocks(links)
    matrix = connection.matrices[name]
    progress.stage("epsilon-form of the diagonal blocks")
    solved: dict[tuple[int, ...], Block] = {}
    obstructions: list[Obstruction] = []
    for done, rows in enumerate(blocks):
        subject = f"block {', '.join(connection.labels[i] for i in rows)}"
        own = part(matrix, rows, rows)
        if len(rows) == 1:
            outcome = solve_single(own[0][0], name)
        else:
            outcome = solve_coupled(own, name, primes, seed, subject)
        if isinstance(outcome, Finding):
            obstructions.append(_obstruction(rows, outcome, own, name))
        else:
            solved[rows] = outcome
        progress.advance(done + 1, len(blocks))
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
        obstructions.append(_obstruction(rows, outcome_.finding, None, name))
    if not obstructions:
        return outcome_
    return Obstructed(tuple(obstructions), tuple(sorted(i for block in free for i in block)), outcome_)


def _obstruction(rows: tuple[int, ...], found: Finding, own: Matrix | None, name: str) -> Obstruction:
    operator = None if own is None else picard_fuchs(own, name)
    return Obstruction(rows, found.reason, operator, found.exponents)


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
    ring, name = connection.ring, connection.variables[0]
    order = [i for block in blocks for i in block]
    starts = [sum(len(b) for b in blocks[:k]) for k in range(len(blocks) + 1)]
    ranges = [range(a, b) for a, b in pairwise(starts)]
    letters = _letters(connection, blocks, name)
    grid = _diagonalised(connection.matrices[name], blocks, solved, ring, name)
    grid, change = eliminate(grid, [block.residues for block in solved], letters, ring, name)
    system = fuchsian(_joined(grid), ranges, ring, name)
    if isinstance(system, Stuck):
        return system
    factored = factor_eps(system, ranges, [block.inverse for block in solved], primes, seed)
    if isinstance(factored, Stuck):
        return factored
    unipotent = tuple(
        tuple(a + b for a, b in zip(x, y, strict=True))
        for x, y in zip(identity(ring, len(order)), _joined(change), strict=True)
    )
    left = _diagonal([block.transformation for block in solved], ring)
    right = _diagonal([block.inverse for block in solved], ring)
    transformation = product(product(left, unipotent, ring), factored.matrix, ring)
    back = product(inverse(factored.matrix, ring), product(inverse(unipotent, ring), right, ring), ring)
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
