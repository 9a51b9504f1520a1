"""Results as the JSON objects that the commands print."""

from __future__ import annotations

from typing import Any

from ibpred.family.definition import FamilyDefinition
from ibpred.family.polynomials import symanzik
from ibpred.reduction.masters import Masters
from ibpred.sectors.analysis import SectorAnalysis
from ibpred.sectors.order import lines_of

Data = dict[str, Any]


def corner(sector: int, lines: int) -> list[int]:
    """Powers of a sector's corner integral: one for its lines, zero for the others."""
    return [sector >> i & 1 for i in range(lines)]


def inspect_data(family: FamilyDefinition, analysis: SectorAnalysis) -> Data:
    """What `inspect` prints; sectors are given by the powers of their corner integrals."""
    first, second = symanzik(family)
    lines = len(family.lines)
    return {
        "family": family.name,
        "loops": len(family.loops),
        "legs": len(family.external) + 1 if family.external else 0,
        "U": first.text(),
        "F": second.text(),
        "sectors": len(analysis.sectors),
        "zero_sectors": [corner(sector, lines) for sector in sorted(analysis.zero)],
        "sector_classes": [[corner(sector, lines) for sector in members] for members in analysis.classes],
    }


def masters_data(family: FamilyDefinition, masters: Masters) -> Data:
    """What `masters` prints."""
    return {
        "family": family.name,
        "count": len(masters.masters),
        "masters": [
            {"powers": list(powers), "lines": sum(a > 0 for a in powers)} for powers in masters.masters
        ],
    }
