"""Variables in which the square roots of a system are rational.

Roots of a single ratio are removed by double covers; roots that mix ratios by conics, one after the other
(see `rationalise`).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

from ibpred.epsform.blocks import Block, Finding
from ibpred.epsform.factorise import Outcomes, cover_for, diagonal_blocks, solve_block
from ibpred.epsform.form import Connection
from ibpred.epsform.places import places_of
from ibpred.epsform.roots.conics import Step, odd_factors, swapped
from ibpred.epsform.roots.cover import Cover, branch_points, new_ratio, parametrisation, pulled_back
from ibpred.epsform.roots.rationalise import rationalise
from ibpred.epsform.roots.tags import Tag, product_of
from ibpred.epsform.structure import restricted
from ibpred.errors import OutOfTimeError
from ibpred.exact.rational import Rational, Ring, ring
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
    first = _all_blocks(connection, primes, seed, progress, expired)
    given = _Start((), connection.variables, open_tags(first), _lacking(first))
    if given.lacking:
        covered, needed = _covers_of_blocks(connection, first, primes, seed, progress, expired)
    else:
        covered, needed = _covers_of_tags(given, connection.ring), False
    used = _variables(connection, covered, (), True) if covered.steps else None
    if len(connection.variables) == 1 or not covered.tags:
        return RootVariables(used, None)
    letters = letters_of(connection)
    radicands = tuple(product_of(tag, connection.ring) for tag in given.tags)
    offered: Variables | None = None
    for start in dict.fromkeys((covered, given)):
        moved = [start.pulled(letter) for letter in letters]
        ratios = [start.pulled(connection.ring.variable(name)) for name in connection.variables]
        change = rationalise(start.names, moved, start.radicands(connection.ring), ratios, progress)
        if change is None:
            continue
        whole = _Start((*start.steps, *change.steps), change.names, (), start.lacking)
        found = _variables(connection, whole, radicands, change.linear)
        if change.fit and _needed_roots_help(connection, whole, primes, seed):
            return RootVariables(found, None)
        offered = found if offered is None else offered
    # functions of size one carry their roots as tags, so covers serve only where they remove all of these
    lacked = {tag for _, tag in covered.lacking}
    tagged = any(tag not in lacked for tag in covered.tags)
    return RootVariables(used if not tagged or needed else None, offered)


@dataclass(frozen=True)
class _Start:
    """Where a search for variables begins.

    Attributes
    ----------
    steps
        The changes of single variables made before.
    names
        The variables.
    tags
        The roots that are left.
    lacking
        The rows of blocks that have no epsilon-form without a root, and the letters under it.
    """

    steps: tuple[Step, ...]
    names: tuple[str, ...]
    tags: tuple[Tag, ...]
    lacking: tuple[tuple[tuple[int, ...], Tag], ...]

    def pulled(self, element: Rational) -> Rational:
        """A function of the variables of the system in terms of these."""
        for step in self.steps:
            element = step.pulled(element)
        return element

    def radicands(self, field: Ring) -> list[Rational]:
        """The radicands of the roots that are left."""
        here = self.steps[-1].value.ring if self.steps else field
        return [product_of(tag, here) for tag in self.tags]


def _covers_of_tags(start: _Start, field: Ring) -> _Start:
    """Double covers for roots of a single variable, where nothing but the tags of functions is at stake."""
    steps, names, tags = [*start.steps], start.names, start.tags
    while True:
        found = next((f for f in map(branch_points, tags) if f is not None and len(f[1]) == 2), None)
        if found is None:
            return replace(start, steps=tuple(steps), names=names, tags=tags)
        name, points = found
        new = new_ratio(field.names)
        target = swapped(field, name, new)
        step = Step(name, new, parametrisation(points, target, new))
        moved = (odd_factors(step.pulled(product_of(tag, field))) for tag in tags)
        tags = tuple(dict.fromkeys(tag for tag in moved if tag))
        steps.append(step)
        names = tuple(new if n == name else n for n in names)
        field = target


def _covers_of_blocks(
    connection: Connection,
    outcomes: Outcomes,
    primes: Sequence[int],
    seed: int,
    progress: Progress,
    expired: Expired,
) -> tuple[_Start, bool]:
    """Double covers where blocks lack roots, and whether some block needs them."""
    covers: list[Cover] = []
    here = connection
    while (cover := cover_for(here, outcomes, primes, seed)) is not None:
        covers.append(cover)
        here = cover.connection
        outcomes = _all_blocks(here, primes, seed, progress, expired)
    steps = tuple(Step(c.ratio, c.new, c.substitution) for c in covers)
    start = _Start(steps, here.variables, open_tags(outcomes), _lacking(outcomes))
    return start, any(cover.needed for cover in covers)


def _all_blocks(
    connection: Connection, primes: Sequence[int], seed: int, progress: Progress, expired: Expired
) -> Outcomes:
    outcomes = diagonal_blocks(connection, primes, seed, progress, expired)
    if any(outcome is None for _, outcome in outcomes):
        raise OutOfTimeError("square roots")
    return outcomes


def _lacking(outcomes: Outcomes) -> tuple[tuple[tuple[int, ...], Tag], ...]:
    """The rows of blocks that lack roots, and the letters under these."""
    found = ((rows, outcome.roots) for rows, outcome in outcomes if isinstance(outcome, Finding))
    return tuple((rows, roots) for rows, roots in found if roots)


def open_tags(outcomes: Outcomes) -> tuple[Tag, ...]:
    """The roots that the diagonal blocks carry or lack, each once."""
    found: list[Tag] = []
    for _, outcome in outcomes:
        if outcome is not None:
            found += [outcome.roots] if isinstance(outcome, Finding) else outcome.tags
    return tuple(dict.fromkeys(tag for tag in found if tag))


def letters_of(connection: Connection) -> tuple[Rational, ...]:
    """The polynomials free of eps at which the system is singular."""
    found: dict[str, Rational] = {}
    for name, matrix in connection.matrices.items():
        for place in places_of([e for row in matrix for e in row], connection.ring, name):
            if not place.moves:
                found[place.text()] = place.element
    return tuple(found.values())


def _needed_roots_help(connection: Connection, whole: _Start, primes: Sequence[int], seed: int) -> bool:
    """Whether the blocks that lack a root have an epsilon-form in the new variables."""
    for rows, _ in whole.lacking:
        block = restricted(connection, rows)
        for step in whole.steps:
            block = pulled_back(block, step.old, step.new, step.value)
        if not isinstance(solve_block(reordered(block, whole.names), primes, seed), Block):
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
    connection: Connection, start: _Start, radicands: Sequence[Rational], linear: bool
) -> Variables:
    images, partners, field = [], [], ring(("eps", *start.names))
    for name in connection.variables:
        partner = name
        for step in start.steps:
            partner = step.new if partner == step.old else partner
        images.append(start.pulled(connection.ring.variable(name)).to_ring(field))
        partners.append(partner)
    return Variables(start.names, tuple(images), tuple(partners), tuple(radicands), linear)
