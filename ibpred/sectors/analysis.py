"""The sector lattice of a family: zero sectors, classes of equivalent sectors, maps between them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from ibpred.exact.labelling import Key
from ibpred.family.definition import FamilyDefinition
from ibpred.sectors.forms import line_forms
from ibpred.sectors.mapping import SectorMap
from ibpred.sectors.momenta import FamilyPair, family_pair
from ibpred.sectors.parameters import all_sectors, family_terms
from ibpred.sectors.scaleless import zero_sectors_of
from ibpred.sectors.symmetry import Place, momentum_map, scalar_map, self_maps


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
        For each sector of a class but the first, one map to a simpler sector of the class: a map
        of momenta to the first one that such a map reaches (which no map of momenta takes further),
        or else a scalar map to the representative. Then, for the sectors that no map of momenta
        takes elsewhere, self-maps (``source == target``) that generate their symmetries, none
        trivial.
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


def analyse(family: FamilyDefinition) -> SectorAnalysis:
    """Zero sectors, classes of equivalent sectors and maps of one family.

    Raises
    ------
    InputError
        If the lines do not determine all scalar products of loop momenta.
    """
    forms = line_forms(family)
    pair = family_pair(forms, forms)
    terms = family_terms(family)
    sectors = all_sectors(family.propagators)
    zero = zero_sectors_of(terms, family.propagators)
    classes: dict[Key, list[int]] = {}
    for sector in sectors:
        if sector not in zero:
            classes.setdefault(terms.canonical(sector).key, []).append(sector)
    between: list[SectorMap] = []
    own: list[SectorMap] = []
    for members in classes.values():
        leaders: list[Place] = []  # sectors that no map of momenta takes elsewhere
        for place in (Place(terms, sector) for sector in members):
            found = _first_momentum_map(pair, place, leaders)
            if found is None:
                if leaders:
                    found = scalar_map(pair, place, leaders[0])
                    assert found is not None, "sectors of one class have equal canonical forms"
                leaders.append(place)
            if found is not None:
                between.append(found)
        for place in leaders:
            own.extend(self_maps(pair, place))
    return SectorAnalysis(
        family=family.name,
        sectors=sectors,
        zero=zero,
        classes=tuple(tuple(members) for members in classes.values()),
        maps=(*between, *own),
    )


def _first_momentum_map(pair: FamilyPair, place: Place, leaders: Sequence[Place]) -> SectorMap | None:
    for leader in leaders:
        found = momentum_map(pair, place, leader)
        if found is not None:
            return found
    return None
