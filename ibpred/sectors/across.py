"""Sectors that two families share."""

from __future__ import annotations

from ibpred.exact.labelling import Key
from ibpred.family.definition import FamilyDefinition
from ibpred.sectors.analysis import SectorAnalysis
from ibpred.sectors.forms import line_forms
from ibpred.sectors.mapping import SectorMap
from ibpred.sectors.momenta import family_pair
from ibpred.sectors.parameters import family_terms
from ibpred.sectors.symmetry import Place, find_map


def shared_sectors(
    source: FamilyDefinition,
    source_analysis: SectorAnalysis,
    target: FamilyDefinition,
    target_analysis: SectorAnalysis,
) -> tuple[SectorMap, ...]:
    """Maps from the classes of one family to equal classes of another.

    Parameters
    ----------
    source, target
        The families; invariants of the same name are the same quantity.
    source_analysis, target_analysis
        What `analyse` found for them.

    Returns
    -------
    tuple of SectorMap
        One map for each class of the source that the target has too, between the representatives,
        in the source's order. Maps of momenta need equal kinematic rings; otherwise they are scalar.

    Raises
    ------
    InputError
        If the lines of a family do not determine all scalar products of loop momenta.
    """
    pair = family_pair(line_forms(source), line_forms(target))
    source_terms, target_terms = family_terms(source), family_terms(target)
    known: dict[Key, int] = {
        target_terms.canonical(sector).key: sector for sector in target_analysis.representatives
    }
    result = []
    for sector in source_analysis.representatives:
        partner = known.get(source_terms.canonical(sector).key)
        if partner is not None:
            found = find_map(pair, Place(source_terms, sector), Place(target_terms, partner))
            assert found is not None, "equal canonical forms have a renaming"
            result.append(found)
    return tuple(result)
