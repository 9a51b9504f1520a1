"""The epsilon-factorised form of a differential system."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

from ibpred.epsform.assemble import assembled
from ibpred.epsform.blocks import Block, Finding
from ibpred.epsform.diagonal.characters import times_root
from ibpred.epsform.diagonal.coupled import solve_coupled
from ibpred.epsform.diagonal.coupled_many import solve_coupled_many
from ibpred.epsform.diagonal.rooted import solve_rooted
from ibpred.epsform.diagonal.single import solve_single
from ibpred.epsform.form import Connection, EpsilonForm, Obstructed, Obstruction
from ibpred.epsform.obstructions.geometry import obstruction
from ibpred.epsform.roots.cover import Cover, branch_points, describe, double_cover
from ibpred.epsform.roots.tags import canonical
from ibpred.epsform.structure import coupled_blocks, couplings, reachable, restricted
from ibpred.errors import OutOfTimeError, UnfinishedError
from ibpred.progress import SILENT, Expired, Limited, Progress, never
from ibpred.reconstruct.notes import FORGETFUL, Notes


def factorise(
    connection: Connection,
    primes: Sequence[int],
    seed: int,
    progress: Progress | None = None,
    expired: Expired = never,
    notes: Notes = FORGETFUL,
) -> EpsilonForm | Obstructed:
    """Bring a system to epsilon-factorised form, or say what is in the way.

    Coupled diagonal blocks by lattices and global sections (see `sections`; `characters` where functions of
    one block carry different square roots), the couplings between blocks by exact elimination (see
    `triangular`), then the constant matrix that factors eps out (see `constant`,
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
    expired
        Asked before and during the work on each coupled block whether the time is over. The blocks that are
        left then count as obstructed, with a sentence that says so, and the outcome is marked as incomplete.
    notes
        Where the forms of coupled blocks are noted, so that an interrupted factorisation goes on.

    Returns
    -------
    outcome
        `Obstructed` is a mathematical finding, not an error: no form exists over functions rational in
        the ratios, times square roots of such functions.

    Raises
    ------
    UnfinishedError
        Where primes and samples do not suffice.
    OutOfTimeError
        If the time is over when all blocks are done but not the couplings between them.
    """
    progress = SILENT if progress is None else progress
    if not connection.variables:
        raise UnfinishedError("a system without ratios has no differential equation to factorise")
    links = couplings(connection)
    solved: dict[tuple[int, ...], Block] = {}
    obstructions: list[Obstruction] = []
    complete = True
    for rows, outcome in diagonal_blocks(connection, primes, seed, progress, expired, notes):
        if outcome is None:
            complete = False
            obstructions.append(Obstruction(rows, _OVER, None, ()))
        elif isinstance(outcome, Finding):
            try:
                rooted = _rooted(outcome, rows, connection, primes, seed, expired, notes)
            except OutOfTimeError:
                complete = False
                obstructions.append(Obstruction(rows, _OVER, None, outcome.exponents))
                continue
            if isinstance(rooted, Block):
                solved[rows] = rooted
                continue
            outcome = on_cover(rooted, restricted(connection, rows), primes, seed)
            obstructions.append(obstruction(connection, rows, outcome, primes, seed))
        else:
            solved[rows] = outcome
    blocks = coupled_blocks(links)
    reach = reachable(links)
    # an incomplete outcome is worth having: then the couplings of the few blocks done are not cut short
    limited = Limited(progress, expired if complete else never)
    limited.stage("epsilon-form of the couplings")
    while True:
        stuck = {row for found in obstructions for row in found.rows}
        free = tuple(block for block in blocks if not reach[block[0]] & stuck)
        if not free:
            return Obstructed(tuple(obstructions), (), None, complete)
        outcome_ = assembled(connection, free, [solved[block] for block in free], primes, seed, limited)
        if isinstance(outcome_, EpsilonForm):
            break
        rows = free[outcome_.block]
        stuck_at = outcome_.finding
        obstructions.append(Obstruction(rows, stuck_at.reason, None, stuck_at.exponents))
    if not obstructions:
        return outcome_
    rows_solved = tuple(sorted(i for block in free for i in block))
    return Obstructed(tuple(obstructions), rows_solved, outcome_, complete)


_OVER = "not finished: the time allowed was over before or during this block's turn"


Outcomes = tuple[tuple[tuple[int, ...], Block | Finding | None], ...]
"""The rows of each diagonal block with its form or what is in the way."""


def diagonal_blocks(
    connection: Connection,
    primes: Sequence[int],
    seed: int,
    progress: Progress,
    expired: Expired = never,
    notes: Notes = FORGETFUL,
) -> Outcomes:
    """The sets of rows that depend on each other, each with its epsilon-form or what is in the way.

    None for coupled blocks that were not finished since the time was over.
    """
    blocks = coupled_blocks(couplings(connection))
    progress.stage(_DURING)
    found: list[tuple[tuple[int, ...], Block | Finding | None]] = []
    for rows in blocks:
        try:
            found.append((rows, _solved(rows, connection, primes, seed, expired, notes)))
        except OutOfTimeError:
            found.append((rows, None))
        progress.advance(len(found), len(blocks))
    return tuple(found)


@dataclass(frozen=True)
class _Outcome:
    block: Block | None
    finding: Finding | None


def _solved(
    rows: tuple[int, ...],
    connection: Connection,
    primes: Sequence[int],
    seed: int,
    expired: Expired,
    notes: Notes,
) -> Block | Finding:
    """A block; one function alone is solved sooner than read from the notes."""
    block = restricted(connection, rows)
    if len(rows) == 1:
        return solve_block(block, primes, seed)
    limited = Limited(SILENT, expired)
    limited.stage(_DURING)
    name = f"block of rows {', '.join(map(str, rows))}"
    return _noted(name, lambda: solve_block(block, primes, seed, limited), notes)


_DURING = "epsilon-form of the diagonal blocks"


def _noted(name: str, compute: Callable[[], Block | Finding], notes: Notes) -> Block | Finding:
    """A block from the notes where it is noted."""

    def outcome() -> _Outcome:
        found = compute()
        return _Outcome(found, None) if isinstance(found, Block) else _Outcome(None, found)

    kept = notes.kept(name, _Outcome, outcome)
    found = kept.block if kept.block is not None else kept.finding
    assert found is not None
    return found


def _rooted(
    found: Finding,
    rows: tuple[int, ...],
    connection: Connection,
    primes: Sequence[int],
    seed: int,
    expired: Expired,
    notes: Notes,
) -> Block | Finding:
    """A block that lacks roots, its functions with roots of their own; the finding where that fails too."""
    if not found.roots:
        return found
    block = restricted(connection, rows)
    subject = f"block {', '.join(block.labels)}"

    limited = Limited(SILENT, expired)
    limited.stage(_DURING)

    def solve(smaller: Connection) -> EpsilonForm | Obstructed:
        return factorise(smaller, primes, seed, limited)

    return _noted(
        f"roots in the block of rows {', '.join(map(str, rows))}",
        lambda: solve_rooted(block, found, solve, primes, seed, subject, limited),
        notes,
    )


def solve_block(
    block: Connection, primes: Sequence[int], seed: int, progress: Progress = SILENT
) -> Block | Finding:
    """A block, a square root that multiplies all of it split off as its tag.

    Parameters
    ----------
    block
        The block as a system of its own.
    primes, seed
        As for `factorise`.
    progress
        Told about each sample.
    """
    if len(block.labels) == 1:
        return solve_single({name: block.matrices[name][0][0] for name in block.variables})
    outcome = _solve_coupled(block, primes, seed, progress)
    if not isinstance(outcome, Finding) or not outcome.common:
        return outcome
    rooted = _solve_coupled(times_root(block, outcome.common), primes, seed, progress)
    if isinstance(rooted, Finding):
        return outcome
    return replace(rooted, tags=tuple(canonical((*outcome.common, *tag)) for tag in rooted.tags))


def _solve_coupled(
    block: Connection, primes: Sequence[int], seed: int, progress: Progress
) -> Block | Finding:
    subject = f"block {', '.join(block.labels)}"
    if len(block.variables) > 1:

        def solve(smaller: Connection) -> EpsilonForm | Obstructed:
            return factorise(smaller, primes, seed, progress)

        return solve_coupled_many(block, solve, primes, seed, subject, progress)
    name = block.variables[0]
    return solve_coupled(block.matrices[name], name, primes, seed, subject, progress)


def on_cover(found: Finding, block: Connection, primes: Sequence[int], seed: int) -> Finding:
    """Add to a missing square root what would remove it, and whether the block has a form then."""
    points = found.branch_points
    if not points:
        return found
    reason = f"{found.reason}; {describe(points, found.variable)}"
    if len(points) == 2:
        outcome = solve_block(double_cover(block, found.variable, points).connection, primes, seed)
        if isinstance(outcome, Finding):
            return Finding(f"{reason}, but even then: {outcome.reason}", found.exponents)
    return Finding(reason, found.exponents, points, found.variable)


def root_cover(
    connection: Connection, primes: Sequence[int], seed: int, progress: Progress = SILENT
) -> Cover | None:
    """The double cover that removes the first square root with two rational branch points, if there is one.

    Single functions carry their roots as tags also without a cover; coupled blocks need it, and on it all
    letters are rational. Epsilon-forms on the cover come from `factorise` of its connection; where that
    needs another root, take the cover again.

    Parameters
    ----------
    connection
        The system.
    primes, seed, progress
        As for `factorise`.
    """
    return cover_for(connection, diagonal_blocks(connection, primes, seed, progress), primes, seed)


def cover_for(connection: Connection, outcomes: Outcomes, primes: Sequence[int], seed: int) -> Cover | None:
    """As `root_cover`, the diagonal blocks given."""
    for rows, outcome in outcomes:
        if isinstance(outcome, Finding):
            if len(outcome.branch_points) == 2 and _helps(
                restricted(connection, rows), outcome, primes, seed, _COVERS
            ):
                return double_cover(connection, outcome.variable, outcome.branch_points, needed=True)
        elif outcome is not None and outcome.rooted:
            found = branch_points(outcome.tags[0])
            if found is not None and len(found[1]) == 2:
                return double_cover(connection, *found)
    return None


_COVERS = 3
"""Double covers on top of each other that are tried for one block."""


def _helps(block: Connection, found: Finding, primes: Sequence[int], seed: int, most: int) -> bool:
    """Whether a block has an epsilon-form on a double cover, or on a double cover of that."""
    covered = double_cover(block, found.variable, found.branch_points).connection
    outcome = solve_block(covered, primes, seed)
    if not isinstance(outcome, Finding):
        return True
    if len(outcome.branch_points) != 2 or most <= 1:
        return False
    return _helps(covered, outcome, primes, seed, most - 1)
