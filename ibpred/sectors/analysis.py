"""The sector lattice of a family: zero sectors, classes of equivalent sectors, maps between them."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

from ibpred.exact.labelling import Key
from ibpred.family.definition import FamilyDefinition
from ibpred.sectors.forms import line_forms
from ibpred.sectors.mapping import SectorMap
from ibpred.sectors.momenta import FamilyPair, family_pair
from ibpred.sectors.parameters import all_sectors, family_terms
from ibpred.sectors.scaleless import zero_sectors_of
from ibpred.sectors.symmetry import Place, lesser_map, momentum_map, self_maps


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
        or else a partial or scalar map to the representative. Then, for the sectors that no map of momenta
        takes elsewhere, self-maps (``source == target`` and equal families) that generate their
        symmetries, none trivial. Where several families are analysed together, classes reach over all
        of them for this purpose, and a target may belong to an earlier family.
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
    return analyse_together([family])[0]


def analyse_together(families: Sequence[FamilyDefinition]) -> tuple[SectorAnalysis, ...]:
    """The same for several families, with the sectors that they share mapped to the first that has them.

    Parameters
    ----------
    families
        With the same kinematics, each with its own name; earlier ones count as simpler.

    Returns
    -------
    tuple of SectorAnalysis
        One for each family.

    Raises
    ------
    InputError
        As `analyse`.
    """
    forms = [line_forms(family) for family in families]
    terms = [family_terms(family) for family in families]
    pairs: dict[tuple[int, int], FamilyPair] = {}

    def pair(source: int, target: int) -> FamilyPair:
        if (source, target) not in pairs:
            pairs[source, target] = family_pair(forms[source], forms[target])
        return pairs[source, target]

    leaders: dict[Key, list[tuple[int, Place]]] = {}  # sectors that no map of momenta takes elsewhere
    found = []
    for number, family in enumerate(families):
        zero = zero_sectors_of(terms[number], family.propagators)
        sectors = all_sectors(family.propagators)
        classes: dict[Key, list[int]] = {}
        for sector in sectors:
            if sector not in zero:
                classes.setdefault(terms[number].canonical(sector).key, []).append(sector)
        between: list[SectorMap] = []
        own: list[SectorMap] = []
        for key, members in classes.items():
            simpler = leaders.setdefault(key, [])
            for place in (Place(terms[number], sector) for sector in members):
                reached = _first_momentum_map(pair, number, place, simpler)
                if reached is None:
                    if simpler:
                        target, first = simpler[0]
                        reached = lesser_map(pair(number, target), place, first)
                        assert reached is not None, "sectors of one class have equal canonical forms"
                    simpler.append((number, place))
                    own.extend(self_maps(pair(number, number), place))
                if reached is not None:
                    between.append(reached)
        found.append(
            SectorAnalysis(
                family=family.name,
                sectors=sectors,
                zero=zero,
                classes=tuple(tuple(members) for members in classes.values()),
                maps=(*between, *own),
            )
        )
    return tuple(found)


def _first_momentum_map(
    pair: Callable[[int, int], FamilyPair],
    number: int,
    place: Place,
    leaders: Sequence[tuple[int, Place]],
) -> SectorMap | None:
    for target, leader in leaders:
        found = momentum_map(pair(number, target), place, leader)
        if found is not None:
            return found
    return None
