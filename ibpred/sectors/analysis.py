"""The sector lattice of a family: zero sectors, classes of equivalent sectors, maps between them."""

from __future__ import annotations

from dataclasses import dataclass

from ibpred.sectors.mapping import SectorMap


@dataclass(frozen=True)
class SectorAnalysis:
    """What the symmetries and the scaleless test say about the sectors of a family.

    Attributes
    ----------
    family
        Name of the family.
    sectors
        All sector ids made of lines that are no numerators, simplest first.
    zero
        Those whose integrals vanish: scaleless, or without a cut line.
    classes
        The other sectors in classes whose U and F agree up to a renaming of the lines; each class
        and the list of classes simplest first. The first of a class is its representative.
    maps
        For each sector of a class but the first, one map to the representative; then self-maps
        of the representatives (``source == target``) that generate their symmetries, none trivial.
    """

    family: str
    sectors: tuple[int, ...]
    zero: frozenset[int]
    classes: tuple[tuple[int, ...], ...]
    maps: tuple[SectorMap, ...]

    @property
    def nonzero(self) -> tuple[int, ...]:
        """Sectors that do not vanish, simplest first."""
        return tuple(sector for sector in self.sectors if sector not in self.zero)

    @property
    def representatives(self) -> tuple[int, ...]:
        """The first sector of each class."""
        return tuple(members[0] for members in self.classes)

    def maps_from(self, sector: int) -> tuple[SectorMap, ...]:
        """The maps whose source is `sector`."""
        return tuple(found for found in self.maps if found.source == sector)
