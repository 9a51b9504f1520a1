"""The masters of each sector compared with the critical points of its U + F."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.progress import SILENT, Progress
from ibpred.sectors.analysis import SectorAnalysis
from ibpred.sectors.critical import critical_points
from ibpred.sectors.order import sector_of


@dataclass(frozen=True)
class SectorCount:
    """The two counts of one sector.

    Attributes
    ----------
    sector
        The sector.
    masters
        Masters that the identities leave in it.
    points
        Critical points; None where they are not decided.
    note
        Why the counts differ, or why there is no second one; empty where they agree.
    """

    sector: int
    masters: int
    points: int | None
    note: str

    @property
    def agrees(self) -> bool:
        """Whether the counts are equal."""
        return self.points == self.masters


def compare_counts(
    family: FamilyDefinition,
    analysis: SectorAnalysis,
    masters: Sequence[Powers],
    prime: int,
    seed: int,
    progress: Progress = SILENT,
) -> tuple[SectorCount, ...]:
    """Count the masters of every class of sectors a second time, without identities.

    Parameters
    ----------
    family, analysis
        The family and its sectors.
    masters
        The masters, as `find_masters` gives them.
    prime, seed
        Field of the count, and the seed of the random values of the invariants.
    progress
        Told about each sector.

    Returns
    -------
    tuple of SectorCount
        For the representatives of all classes, simplest first.
    """
    progress.stage("critical points")
    found: list[SectorCount] = []
    for step, sector in enumerate(analysis.representatives):
        count = sum(sector_of(powers) == sector for powers in masters)
        points = critical_points(family, sector, prime, seed)
        note = points.note
        if points.count is not None:
            note = _explanation(analysis, sector, count, points.count, points.note)
        found.append(SectorCount(sector, count, points.count, note))
        progress.advance(step + 1, len(analysis.representatives))
    return tuple(found)


def _explanation(analysis: SectorAnalysis, sector: int, masters: int, points: int, note: str) -> str:
    if masters == points:
        return ""
    if masters > points:
        return note or (
            "fewer critical points than masters: some may lie at infinity, or a relation is missing"
        )
    symmetries = sum(map_.is_symmetry for map_ in analysis.maps_from(sector))
    if symmetries:
        generators = "one generator" if symmetries == 1 else f"{symmetries} generators"
        return f"symmetries of the sector ({generators}) relate masters"
    return "no symmetry of the sector was found that relates masters; relations to other sectors may"
