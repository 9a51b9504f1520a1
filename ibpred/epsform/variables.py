"""Variables in which the square roots of a system are rational.

Roots of a single ratio are removed by double covers; roots that mix ratios by conics, one after the other
(see `rationalise`).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

from ibpred.epsform.blocks import Block, Finding
from ibpred.epsform.conics import Step
from ibpred.epsform.cover import Cover, pulled_back
from ibpred.epsform.factorise import Outcomes, cover_for, diagonal_blocks, solve_block
from ibpred.epsform.form import Connection
from ibpred.epsform.places import places_of
from ibpred.epsform.rationalise import Change, rationalise
from ibpred.epsform.structure import restricted
from ibpred.epsform.tags import product_of
from ibpred.errors import OutOfTimeError
from ibpred.exact.rational import Rational, ring
from ibpred.progress import SILENT, Expired, Progress, never


@dataclass(frozen=True)
class Variables:
    """A change of the variables of a system.

    Attributes
    ----------
    names
        The new variables in order.
    images
        The old ones, in the order of the connection's, in terms of the new ones.
    partners
        For each old variable the new one that replaces it.
    radicands
        What is a square in them.
    linear
        Whether the letters are linear level by level (see `rationalise`).
    """

    names: tuple[str, ...]
    images: tuple[Rational, ...]
    partners: tuple[str, ...]
    radicands: tuple[Rational, ...]
    linear: bool


@dataclass(frozen=True)
class RootVariables:
    """What is done about the square roots of a system.

    Attributes
    ----------
    used
        The variables to use; None for those given.
    offered
        Variables in which all roots are rational that are not used: letters are not linear, or the region
        where the ratios are positive does not touch the corner. None where none were found or needed.
    """

    used: Variables | None
    offered: Variables | None


def root_variables(
    connection: Connection,
    primes: Sequence[int],
    seed: int,
    progress: Progress = SILENT,
    expired: Expired = never,
) -> RootVariables:
    """Find variables in which the square roots are rational.

    They are used if no root is left and the letters are linear level by level; double covers also where a
    coupled block has no epsilon-form without them. In one ratio they are always used.

    Parameters
    ----------
    connection
        The system.
    primes, seed, progress, expired
        As for `factorise`.

    Raises
    ------
    OutOfTimeError
        If the time is over before all blocks are done.
    """
    first = outcomes = _all_blocks(connection, primes, seed, progress, expired)
    covers: list[Cover] = []
    here = connection
    while (cover := cover_for(here, outcomes, primes, seed)) is not None:
        covers.append(cover)
        here = cover.connection
        outcomes = _all_blocks(here, primes, seed, progress, expired)
    steps = tuple(Step(c.ratio, c.new, c.substitution) for c in covers)
    covered = _variables(connection, steps, here.variables, (), True) if steps else None
    if len(connection.variables) == 1 or not (radicands := open_radicands(here, outcomes)):
        return RootVariables(covered, None)
    offered: Variables | None = None
    starts = [((), connection, open_radicands(connection, first))] if steps else []
    for before, start, roots in [(steps, here, radicands), *starts]:
        ratios = _variables(connection, before, start.variables, (), True).images
        change = rationalise(start.variables, letters_of(start), roots, ratios, progress)
        if change is None:
            continue
        found = _variables(
            connection,
            (*before, *change.steps),
            change.names,
            open_radicands(connection, first),
            change.linear,
        )
        if change.fit and _needed_roots_help(
            start, change, outcomes if before == steps else first, primes, seed
        ):
            return RootVariables(found, None)
        offered = found if offered is None else offered
    # functions of size one carry their roots as tags, so covers serve only where they remove all of these
    tagged = any(isinstance(outcome, Block) and outcome.rooted for _, outcome in outcomes)
    return RootVariables(covered if not tagged or any(c.needed for c in covers) else None, offered)


def _all_blocks(
    connection: Connection, primes: Sequence[int], seed: int, progress: Progress, expired: Expired
) -> Outcomes:
    outcomes = diagonal_blocks(connection, primes, seed, progress, expired)
    if any(outcome is None for _, outcome in outcomes):
        raise OutOfTimeError("square roots")
    return outcomes


def open_radicands(connection: Connection, outcomes: Outcomes) -> tuple[Rational, ...]:
    """The radicands of the roots that the diagonal blocks carry or lack."""
    found: dict[str, Rational] = {}
    for _, outcome in outcomes:
        tags = () if outcome is None else (outcome.roots,) if isinstance(outcome, Finding) else outcome.tags
        for tag in tags:
            if tag:
                radicand = product_of(tag, connection.ring)
                found[str(radicand)] = radicand
    return tuple(found.values())


def letters_of(connection: Connection) -> tuple[Rational, ...]:
    """The polynomials free of eps at which the system is singular."""
    found: dict[str, Rational] = {}
    for name, matrix in connection.matrices.items():
        for place in places_of([e for row in matrix for e in row], connection.ring, name):
            if not place.moves:
                found[place.text()] = place.element
    return tuple(found.values())


def _needed_roots_help(
    start: Connection, change: Change, outcomes: Outcomes, primes: Sequence[int], seed: int
) -> bool:
    """Whether the blocks that lack a root have an epsilon-form in the new variables."""
    for rows, outcome in outcomes:
        if isinstance(outcome, Finding) and outcome.roots:
            block = restricted(start, rows)
            for step in change.steps:
                block = pulled_back(block, step.old, step.new, step.value)
            if not isinstance(solve_block(reordered(block, change.names), primes, seed), Block):
                return False
    return True


def reordered(connection: Connection, names: Sequence[str]) -> Connection:
    """The same system, its variables in another order."""
    field = ring(("eps", *names))
    matrices = {
        name: tuple(tuple(e.to_ring(field) for e in row) for row in connection.matrices[name])
        for name in names
    }
    return replace(connection, variables=tuple(names), ring=field, matrices=matrices)


def _variables(
    connection: Connection,
    steps: Sequence[Step],
    names: Sequence[str],
    radicands: Sequence[Rational],
    linear: bool,
) -> Variables:
    images, partners, field = [], [], ring(("eps", *names))
    for name in connection.variables:
        image, partner = connection.ring.variable(name), name
        for step in steps:
            image = step.pulled(image)
            partner = step.new if partner == step.old else partner
        images.append(image.to_ring(field))
        partners.append(partner)
    return Variables(tuple(names), tuple(images), tuple(partners), tuple(radicands), linear)
