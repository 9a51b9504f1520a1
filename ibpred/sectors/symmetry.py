"""Maps between equivalent sectors, and the symmetries of one sector."""

from __future__ import annotations

from dataclasses import dataclass

from ibpred.exact.labelling import Permutation, compose, group_elements, isomorphism
from ibpred.sectors.closure import ChangeGroup
from ibpred.sectors.forms import Matrix, is_line
from ibpred.sectors.mapping import Image, SectorMap
from ibpred.sectors.momenta import FamilyPair, momentum_changes, verified_images
from ibpred.sectors.order import lines_of
from ibpred.sectors.parameters import FamilyTerms
from ibpred.sectors.partial import partial_images


@dataclass(frozen=True)
class Place:
    """A sector of a family.

    Attributes
    ----------
    terms
        U and F of the family.
    sector
        The sector.
    """

    terms: FamilyTerms
    sector: int


def momentum_map(pair: FamilyPair, source: Place, target: Place) -> SectorMap | None:
    """A change of momenta that carries one sector into another.

    Every renaming of lines that carries U and F of the source into those of the target is tried.

    Parameters
    ----------
    pair
        The families of the sectors.
    source, target
        The sectors.

    Returns
    -------
    SectorMap or None
        None if no renaming of lines is a change of momenta.
    """
    first = isomorphism(source.terms.canonical(source.sector), target.terms.canonical(target.sector))
    if first is None:
        return None
    source_lines, places = lines_of(source.sector), lines_of(target.sector)
    for symmetry in group_elements(target.terms.symmetries(target.sector), len(places)):
        lines = tuple(places[i] for i in compose(first, symmetry))
        for change in momentum_changes(pair, source_lines, lines):
            found = verified_images(pair, source_lines, lines, change)
            if found is not None:
                return _momentum_map(pair, (source.sector, target.sector), lines, change, *found)
    return None


def lesser_map(pair: FamilyPair, source: Place, target: Place) -> SectorMap | None:
    """A partial map from one sector to another, or else a scalar one.

    Returns
    -------
    SectorMap or None
        None if U and F do not agree under any renaming of lines.
    """
    first = isomorphism(source.terms.canonical(source.sector), target.terms.canonical(target.sector))
    if first is None:
        return None
    sectors = (source.sector, target.sector)
    places = lines_of(target.sector)
    for symmetry in group_elements(target.terms.symmetries(target.sector), len(places)):
        lines = tuple(places[i] for i in compose(first, symmetry))
        found = _partial_map(pair, sectors, lines)
        if found is not None:
            return found
    return _scalar_map(pair, sectors, tuple(places[i] for i in first))


def self_maps(pair: FamilyPair, place: Place) -> tuple[SectorMap, ...]:
    """Generators of the symmetries of a sector, none trivial.

    Changes of momenta come first and generate all that were found; partial or scalar maps follow
    for the renamings of lines that keep U and F and are not among the changes of momenta.

    Parameters
    ----------
    pair
        The family with itself.
    place
        The sector.
    """
    sector = place.sector
    lines = lines_of(sector)
    symmetries = place.terms.symmetries(sector)
    size = len(lines)
    width = len(pair.source.family.loops) + len(pair.source.family.external)
    group = ChangeGroup(width)
    renamings: list[Permutation] = []
    result: list[SectorMap] = []
    for renaming in group_elements(symmetries, size):
        renamed = tuple(lines[i] for i in renaming)
        for change in momentum_changes(pair, lines, renamed):
            if change in group:
                continue
            found = verified_images(pair, lines, renamed, change)
            if found is not None:
                group.adjoin(change)
                renamings.append(renaming)
                result.append(_momentum_map(pair, (sector, sector), renamed, change, *found))
    known = set(group_elements(renamings, size))
    for renaming in symmetries:
        if renaming not in known:
            renamings.append(renaming)
            known = set(group_elements(renamings, size))
            renamed, own = tuple(lines[i] for i in renaming), (sector, sector)
            result.append(_partial_map(pair, own, renamed) or _scalar_map(pair, own, renamed))
    return tuple(result)


def _momentum_map(
    pair: FamilyPair,
    sectors: tuple[int, int],
    lines: tuple[int, ...],
    change: Matrix,
    images: tuple[Image | None, ...],
    flips: tuple[int, ...] = (),
    kind: str = "momentum",
) -> SectorMap:
    loops = len(pair.source.family.loops)
    return SectorMap(
        source_family=pair.source.family.name,
        target_family=pair.target.family.name,
        source=sectors[0],
        target=sectors[1],
        lines=lines,
        kind=kind,
        images=images,
        loop_map=change[:loops],
        leg_map=tuple(row[loops:] for row in change[loops:]),
        flips=flips,
    )


def _partial_map(pair: FamilyPair, sectors: tuple[int, int], lines: tuple[int, ...]) -> SectorMap | None:
    """The map that takes the sector's lines to the given ones, if it reaches a numerator."""
    source_lines = lines_of(sectors[0])
    for change, found in partial_images(pair, source_lines, lines):
        mapped = [found[i] for i in source_lines]
        exact = all(image and is_line(image, j) for image, j in zip(mapped, lines, strict=True))
        if exact and sum(image is not None for image in found) > len(source_lines):
            return _momentum_map(pair, sectors, lines, change, found, kind="partial")
    return None


def _scalar_map(pair: FamilyPair, sectors: tuple[int, int], lines: tuple[int, ...]) -> SectorMap:
    return SectorMap(
        source_family=pair.source.family.name,
        target_family=pair.target.family.name,
        source=sectors[0],
        target=sectors[1],
        lines=lines,
        kind="scalar",
        images=(),
        loop_map=(),
        leg_map=(),
    )
