"""Which integrals are masters: those that no identity reduces, checked to be no artefact of the seeds."""

from __future__ import annotations

import random
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from ibpred.elimination.discovery import discover, reduced
from ibpred.errors import InputError, UnfinishedError
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.family.members import integral_text
from ibpred.identities.quantities import Integral
from ibpred.identities.rows import FamilyIdentities, IntegralRows, family_identities, write_rows
from ibpred.identities.seeding import Depth
from ibpred.progress import SILENT, Progress
from ibpred.reduction.seeds import LARGEST_SYSTEM, depths, expected_entries, full_plans
from ibpred.reduction.system import sparse_system
from ibpred.reduction.wanted import check_powers
from ibpred.sectors.analysis import SectorAnalysis
from ibpred.sectors.mapping import SectorMap
from ibpred.sectors.order import key_columns, sector_of

_NAMED = 5  # how many integrals an error message lists


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
    by_order
        The masters that the total order gives, where others were chosen; else empty.
    """

    family: str
    masters: tuple[Powers, ...]
    prime: int
    point: tuple[int, ...]
    trials: tuple[MastersTrial, ...]
    by_order: tuple[Powers, ...] = ()

    def exchanged(self) -> tuple[tuple[Powers, ...], tuple[Powers, ...]]:
        """The masters that are not those of the total order, and those in whose place they stand."""
        if not self.by_order:
            return (), ()
        mine, theirs = set(self.masters), set(self.by_order)
        return (
            tuple(powers for powers in self.masters if powers not in theirs),
            tuple(powers for powers in self.by_order if powers not in mine),
        )


@dataclass(frozen=True)
class CommonMasters:
    """The master integrals of several families.

    Attributes
    ----------
    families
        Names of the families, crossed ones included.
    masters
        Number of the family and powers, simplest first in the total order.
    prime, point
        Where the eliminations were done.
    trials
        The eliminations; the last two agree.
    by_order
        The masters that the total order gives, where others were chosen; else empty.
    """

    families: tuple[str, ...]
    masters: tuple[Integral, ...]
    prime: int
    point: tuple[int, ...]
    trials: tuple[MastersTrial, ...]
    by_order: tuple[Integral, ...] = ()


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
    """Find the masters of one family; see `find_common_masters`.

    Parameters
    ----------
    family, analysis
        The family and its sectors.
    prime, seed
        Where to eliminate: an engine prime, and the seed of the random point.
    preferred
        Integrals that are to be masters; they are ranked simplest in their sectors.
    progress
        Told about each trial and its sectors.

    Raises
    ------
    InputError, UnfinishedError
        As `find_common_masters`.
    """
    members = family_identities([family], [analysis])
    found = find_common_masters(members, [0], prime, seed, [(0, powers) for powers in preferred], progress)
    return Masters(
        family.name, tuple(powers for _, powers in found.masters), prime, found.point, found.trials
    )


def find_common_masters(
    members: Sequence[FamilyIdentities],
    roots: Sequence[int],
    prime: int,
    seed: int,
    preferred: Sequence[Integral] = (),
    progress: Progress = SILENT,
) -> CommonMasters:
    """Find the masters of several families by eliminating identities of growing depth modulo a prime.

    With seeds of rank up to B the integrals of rank below B are reduced (the edge is not: there false
    masters appear); their irreducible integrals count once all of them lie inside as well and deeper
    seeds leave them unchanged.

    Parameters
    ----------
    members
        The families, analysed together.
    roots
        Numbers of the families whose integrals are wanted. The others (crossings) take part where
        sectors of these are mapped to theirs.
    prime, seed
        Where to eliminate: an engine prime, and the seed of the random point.
    preferred
        Integrals that are to be masters; they are ranked simplest in their sectors.
    progress
        Told about each trial and its sectors.

    Raises
    ------
    InputError
        If all integrals vanish; if a preferred integral vanishes or reduces to other masters.
    UnfinishedError
        If the masters keep changing with the seeds until these are more than `LARGEST_SYSTEM`.
    """
    names = ", ".join(members[number].family.name for number in roots)
    if not any(members[number].analysis.nonzero for number in roots):
        raise InputError(f"{names}: every integral is scaleless and vanishes; there are no masters")
    for number, powers in preferred:
        member = members[number]
        check_powers(member.family, powers)
        if sector_of(powers) in member.analysis.zero:
            raise InputError(f"{member.family.name}: the preferred master {powers} is scaleless and vanishes")
    point = random_point(members[0].family, prime, seed)
    trials: list[MastersTrial] = []
    before: tuple[Integral, ...] | None = None
    last: tuple[Integral, ...] | None = None
    for depth in depths():
        plans = full_plans(members, roots, depth)
        if trials and expected_entries(members, plans) > LARGEST_SYSTEM:
            break
        progress.stage(f"masters: sectors, seeds with {depth.dots} dots and rank {depth.rank}")
        rows = write_rows(members, plans, preferred=preferred)
        found, settled = _irreducible(rows, depth, point, prime, progress)
        trials.append(MastersTrial(depth.dots, depth.rank, len(rows.start) - 1, len(found)))
        if found == last and settled:
            _check_preferred(members, preferred, found)
            families = tuple(member.family.name for member in members)
            return CommonMasters(families, found, prime, point, tuple(trials))
        before, last = last, found
    counts = ", ".join(str(trial.count) for trial in trials)
    changed = sorted(set(before or ()) ^ set(last or ()))
    listed = ", ".join(integral_text(members[n].family.name, powers) for n, powers in changed[:_NAMED])
    raise UnfinishedError(
        f"{names}: the set of masters did not settle as identities were added (counts {counts}; among the "
        f"last to change: {listed or 'none, but some lie at the edge of the seeds'}); deeper identities "
        f"would have more than {LARGEST_SYSTEM} entries"
    )


def _irreducible(
    rows: IntegralRows, depth: Depth, point: tuple[int, ...], prime: int, progress: Progress
) -> tuple[tuple[Integral, ...], bool]:
    """What the integrals well inside the seeds reduce to, and whether all of that is inside as well."""
    _, _, dots, rank = key_columns(rows.powers)
    inside = np.flatnonzero((dots <= depth.dots) & (rank < depth.rank))
    ends = rows.sector_ends.tolist()

    def reached(sectors: int) -> None:
        progress.advance(sectors, len(ends))

    discovery = discover(sparse_system(rows), point, prime, ends, reached)
    solution = reduced(discovery, inside.tolist())
    masters = tuple(rows.integral(column) for column in solution.masters)
    return masters, set(solution.masters) <= set(inside.tolist())


def _elsewhere(members: Sequence[FamilyIdentities], found: SectorMap) -> str:
    """Where the integrals of a sector go that equals another one, and that masters are preferred there."""
    family = next(m.family for m in members if m.family.name == found.target_family)
    corner = tuple(found.target >> i & 1 for i in range(len(family.lines)))
    return (
        f"its sector equals that of {integral_text(family.name, corner)}, to which its integrals are mapped: "
        "prefer integrals of that sector"
    )


def _check_preferred(
    members: Sequence[FamilyIdentities], preferred: Sequence[Integral], found: tuple[Integral, ...]
) -> None:
    for number, powers in preferred:
        if (number, tuple(powers)) not in found:
            sector = sector_of(powers)
            others = [m for n, m in found if n == number and sector_of(m) == sector]
            there = f"the masters of its sector are {others}" if others else "its sector has no masters"
            maps = [m for m in members[number].analysis.maps_from(sector) if not m.is_symmetry]
            if not others and maps:
                there = _elsewhere(members, maps[0])
            raise InputError(
                f"{members[number].family.name}: the preferred master {tuple(powers)} reduces to other "
                f"masters; {there}"
            )
