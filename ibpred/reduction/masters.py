"""Which integrals are masters: those that no identity reduces, checked to be no artefact of the seeds."""

from __future__ import annotations

import random
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from ibpred.elimination.discovery import discover, reduced
from ibpred.errors import InputError, UnfinishedError
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.identities.rows import IntegralRows, write_rows
from ibpred.identities.seeding import Depth
from ibpred.identities.templates import ibp_templates
from ibpred.progress import SILENT, Progress
from ibpred.reduction.seeds import full_plan
from ibpred.reduction.system import sparse_system
from ibpred.reduction.wanted import check_powers
from ibpred.sectors.analysis import SectorAnalysis
from ibpred.sectors.order import key_columns, sector_of

DEPTHS = (Depth(1, 2), Depth(1, 3), Depth(2, 3), Depth(2, 4), Depth(3, 4), Depth(3, 5))
"""Seeds tried, until two in a row leave the same masters, all well inside the seeds."""


@dataclass(frozen=True)
class MastersTrial:
    """One elimination on the way to the masters.

    Attributes
    ----------
    dots, rank
        Depth of the seeds.
    rows
        Number of equations.
    count
        Number of integrals, among those well inside the seeds, that stayed irreducible.
    """

    dots: int
    rank: int
    rows: int
    count: int


@dataclass(frozen=True)
class Masters:
    """The master integrals of a family.

    Attributes
    ----------
    family
        Name of the family.
    masters
        Powers, simplest first in the total order.
    prime, point
        Where the eliminations were done.
    trials
        The eliminations; the last two agree.
    """

    family: str
    masters: tuple[Powers, ...]
    prime: int
    point: tuple[int, ...]
    trials: tuple[MastersTrial, ...]


def random_point(family: FamilyDefinition, prime: int, seed: int) -> tuple[int, ...]:
    """Random residues for the internal ring's variables."""
    source = random.Random(seed)
    return tuple(source.randrange(2, prime) for _ in family.internal_ring.names)


def find_masters(
    family: FamilyDefinition,
    analysis: SectorAnalysis,
    prime: int,
    seed: int,
    preferred: Sequence[Powers] = (),
    progress: Progress = SILENT,
) -> Masters:
    """Find the masters by eliminating identities of growing depth modulo a prime.

    With seeds of rank up to B the integrals of rank below B are reduced (the edge is not: there false
    masters appear); their irreducible integrals count once all of them lie inside as well and deeper
    seeds leave them unchanged.

    Parameters
    ----------
    family, analysis
        The family and its sectors.
    prime, seed
        Where to eliminate: an engine prime, and the seed of the random point.
    preferred
        Integrals that are to be masters; they are ranked simplest in their sectors.
    progress
        Told about each trial.

    Raises
    ------
    InputError
        If all integrals vanish; if a preferred integral vanishes or reduces to other masters.
    UnfinishedError
        If the masters keep changing with the seeds.
    """
    if not analysis.nonzero:
        raise InputError(f"{family.name}: every integral is scaleless and vanishes; there are no masters")
    for powers in preferred:
        check_powers(family, powers)
        if sector_of(powers) in analysis.zero:
            raise InputError(f"{family.name}: the preferred master {powers} is scaleless and vanishes")
    templates = ibp_templates(family)
    point = random_point(family, prime, seed)
    trials: list[MastersTrial] = []
    last: tuple[Powers, ...] | None = None
    progress.stage("master integrals")
    for depth in DEPTHS:
        rows = write_rows(family, analysis, templates, full_plan(analysis, depth), preferred=preferred)
        found, settled = _irreducible(rows, depth, point, prime)
        trials.append(MastersTrial(depth.dots, depth.rank, len(rows.start) - 1, len(found)))
        progress.advance(len(trials), None)
        if found == last and settled:
            _check_preferred(family, preferred, found)
            return Masters(family.name, found, prime, point, tuple(trials))
        last = found
    counts = ", ".join(str(trial.count) for trial in trials)
    raise UnfinishedError(
        f"{family.name}: the set of masters did not settle as identities were added (counts {counts}); "
        "the family may need a missing symmetry or cannot be reduced by identities of this depth"
    )


def _irreducible(
    rows: IntegralRows, depth: Depth, point: tuple[int, ...], prime: int
) -> tuple[tuple[Powers, ...], bool]:
    """What the integrals well inside the seeds reduce to, and whether all of that is inside as well."""
    _, _, dots, rank = key_columns(rows.powers)
    inside = np.flatnonzero((dots <= depth.dots) & (rank < depth.rank))
    solution = reduced(discover(sparse_system(rows), point, prime), inside.tolist())
    masters = tuple(tuple(int(a) for a in rows.powers[column]) for column in solution.masters)
    return masters, set(solution.masters) <= set(inside.tolist())


def _check_preferred(
    family: FamilyDefinition, preferred: Sequence[Powers], found: tuple[Powers, ...]
) -> None:
    for powers in preferred:
        if tuple(powers) not in found:
            others = [m for m in found if sector_of(m) == sector_of(powers)]
            there = f"the masters of its sector are {others}" if others else "its sector has no masters"
            raise InputError(
                f"{family.name}: the preferred master {tuple(powers)} reduces to other masters; {there}"
            )
