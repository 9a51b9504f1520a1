"""How deep the identities are seeded for what is wanted, and how that grows."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass

from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.identities.rows import seeded_sectors
from ibpred.identities.seeding import Depth, SeedPlan, subsectors
from ibpred.sectors.analysis import SectorAnalysis
from ibpred.sectors.order import dots, rank, sector_of


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


GROWTH = (
    Growth(0, 0, -1),
    Growth(0, 0, 0),
    Growth(0, 1, 0),
    Growth(0, 1, 1),
    Growth(1, 1, 1),
    Growth(1, 2, 2),
    Growth(2, 2, 2),
)
"""Tried in this order until all that is wanted reduces to the masters."""

_LEAST = Depth(1, 1)  # without dots the identities leave masters that are none


def full_plan(analysis: SectorAnalysis, depth: Depth) -> SeedPlan:
    """The same depth in every sector that is seeded at all."""
    return dict.fromkeys(seeded_sectors(analysis), depth)


def plan_for(
    family: FamilyDefinition, analysis: SectorAnalysis, wanted: Iterable[Powers], growth: Growth
) -> SeedPlan:
    """Seeds in the sectors of the wanted integrals and in everything below them.

    Sectors that a symmetry maps elsewhere hand their depth to where they are mapped.
    """
    target = {m.source: m.target for m in analysis.maps if m.kind == "momentum" and m.source != m.target}
    top: dict[int, Depth] = {}
    for powers in wanted:
        sector = sector_of(powers)
        if sector in analysis.zero:
            continue
        depth = _LEAST.cover(Depth(dots(powers), rank(powers)))
        sector = target.get(sector, sector)
        top[sector] = depth.cover(top.get(sector, _LEAST))
    plan: dict[int, Depth] = {}
    for sector, depth in top.items():
        own = Depth(depth.dots + growth.dots, depth.rank + growth.rank)
        below = Depth(own.dots, max(_LEAST.rank, depth.rank + growth.rank_below))
        for part in _below(sector, analysis, target):
            reach = own if part == sector else below
            plan[part] = reach.cover(plan.get(part, reach))
    return plan


def _below(sector: int, analysis: SectorAnalysis, target: dict[int, int]) -> Iterator[int]:
    """The seeded sectors that reductions from a sector can meet."""
    found: set[int] = set()
    waiting = [sector]
    while waiting:
        for part in subsectors([waiting.pop()]):
            part = target.get(part, part)
            if part not in found and part not in analysis.zero:
                found.add(part)
                waiting.append(part)
    return iter(sorted(found))
