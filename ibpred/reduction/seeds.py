"""How deep the identities are seeded for what is wanted, and how that grows."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from itertools import count
from math import comb

from ibpred.identities.quantities import Integral
from ibpred.identities.rows import FamilyIdentities
from ibpred.identities.seeding import Depth, SeedPlan
from ibpred.sectors.order import dots, lines_of, rank, sector_of


@dataclass(frozen=True)
class Growth:
    """A step of deepening: how much is added to the depth of what is wanted.

    Attributes
    ----------
    dots, rank
        Added in the sectors of wanted integrals.
    rank_below
        Added to the wanted rank in their subsectors.
    """

    dots: int
    rank: int
    rank_below: int


LARGEST_SYSTEM = 60_000_000
"""Bound on the entries of a system, estimated as the seeds times the terms of all identities. An entry
takes about fifty bytes while the system is written and eliminated: three gigabytes in all."""


def growths() -> Iterator[Growth]:
    """Steps of deepening, to be tried in this order; there is always another one."""
    yield from (Growth(0, 0, -1), Growth(0, 0, 0), Growth(0, 1, 0))
    for more in count():
        yield Growth(more, more + 1, more + 1)
        yield Growth(more + 1, more + 1, more + 1)


def depths() -> Iterator[Depth]:
    """Depths of seeds in all sectors, to be tried in this order for the masters."""
    for more in count(1):
        yield Depth(more, more + 1)
        yield Depth(more, more + 2)


def expected_entries(members: Sequence[FamilyIdentities], plans: Sequence[SeedPlan]) -> int:
    """Seeds of the plans times the terms of the identities: about the size of the system.

    Many coefficients vanish; the relations from symmetries come on top.
    """
    total = 0
    for member, plan in zip(members, plans, strict=True):
        terms = sum(template.terms for template in member.templates)
        lines = len(member.family.lines)
        for sector, depth in plan.items():
            inside = sector.bit_count()
            seeds = comb(inside + depth.dots, inside) * comb(lines - inside + depth.rank, depth.rank)
            total += seeds * terms
    return total


_LEAST = Depth(1, 1)  # without dots the identities leave masters that are none


Node = tuple[int, int]
"""Number of a family, of several, and a sector of it."""


def full_plans(members: Sequence[FamilyIdentities], roots: Sequence[int], depth: Depth) -> list[SeedPlan]:
    """The same depth in every sector that the integrals of some families, the roots, reduce to."""
    reach: dict[Node, Depth] = {}
    targets = _targets(members)
    for number in roots:
        for sector in members[number].analysis.nonzero:
            for node in _below((number, sector), members, targets):
                reach[node] = depth
    return _plans(reach, len(members))


def plans_for(
    members: Sequence[FamilyIdentities], wanted: Iterable[Integral], growth: Growth
) -> list[SeedPlan]:
    """Seeds in the sectors of the wanted integrals and in everything below them, for each family.

    Sectors that a map of momenta takes elsewhere hand their depth to where they are mapped.
    """
    targets = _targets(members)
    top: dict[Node, Depth] = {}
    for number, powers in wanted:
        sector = sector_of(powers)
        if sector in members[number].analysis.zero:
            continue
        depth = _LEAST.cover(Depth(dots(powers), rank(powers)))
        node = targets.momentum.get((number, sector), (number, sector))
        top[node] = depth.cover(top.get(node, _LEAST))
    reach: dict[Node, Depth] = {}
    for node, depth in top.items():
        own = Depth(depth.dots + growth.dots, depth.rank + growth.rank)
        below = Depth(own.dots, max(_LEAST.rank, depth.rank + growth.rank_below))
        for part in _below(node, members, targets):
            # a sector that no map of momenta joins to the wanted one counts as the same
            same = part[1].bit_count() == node[1].bit_count()
            depth_there = own if same else below
            reach[part] = depth_there.cover(reach.get(part, depth_there))
    return _plans(reach, len(members))


@dataclass(frozen=True)
class _Targets:
    """Where sectors are mapped: by momenta (then they need no seeds), or for some numerators only."""

    momentum: Mapping[Node, Node]
    lesser: Mapping[Node, Node]


def _targets(members: Sequence[FamilyIdentities]) -> _Targets:
    number_of = {member.family.name: number for number, member in enumerate(members)}
    momentum: dict[Node, Node] = {}
    lesser: dict[Node, Node] = {}
    for number, member in enumerate(members):
        for map_ in member.analysis.maps:
            if not map_.is_symmetry:
                target = (number_of[map_.target_family], map_.target)
                chosen = momentum if map_.kind == "momentum" else lesser
                chosen[number, map_.source] = target
    return _Targets(momentum, lesser)


def _below(top: Node, members: Sequence[FamilyIdentities], targets: _Targets) -> list[Node]:
    """The seeded sectors that reductions from a sector can meet, itself included."""
    found: set[Node] = set()
    waiting = [targets.momentum.get(top, top)]
    while waiting:
        node = waiting.pop()
        if node in found:
            continue
        found.add(node)
        number, sector = node
        parts = [(number, sector ^ (1 << line)) for line in lines_of(sector)]
        for part in parts + ([targets.lesser[node]] if node in targets.lesser else []):
            if part[1] not in members[part[0]].analysis.zero:
                waiting.append(targets.momentum.get(part, part))
    return sorted(found)


def _plans(reach: Mapping[Node, Depth], families: int) -> list[SeedPlan]:
    plans: list[dict[int, Depth]] = [{} for _ in range(families)]
    for (number, sector), depth in reach.items():
        plans[number][sector] = depth
    return list(plans)
