"""Which line gets the mass, and in which masters its differential equations are good."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from ibpred.errors import ReconstructionError
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.numerics.auxiliary.bases import SMOOTH, TRIAL, dotted_masters, roughness
from ibpred.numerics.auxiliary.families import MASS, with_mass
from ibpred.numerics.auxiliary.plan import Flow
from ibpred.numerics.auxiliary.reducer import Derived, Enlarged, Reducer
from ibpred.sectors.analysis import SectorAnalysis, analyse
from ibpred.sectors.critical import critical_points
from ibpred.sectors.order import lines_of


def places_for_mass(
    reducer: Reducer, family: FamilyDefinition, analysis: SectorAnalysis
) -> Iterator[tuple[int, Enlarged]]:
    """Lines for the mass, one of those that a symmetry takes to each other, few masters first.

    Critical points tell about how many masters there will be (R.N. Lee, A.A. Pomeransky,
    arXiv:1308.6676), for less than it takes to find them; that is done only for the lines that are asked for.
    """
    candidates = []
    for heavy in _inequivalent_lines(family, analysis):
        enlarged = with_mass(family, heavy)
        with_eta = analyse(enlarged)
        candidates.append((_points(reducer, enlarged, with_eta), heavy, enlarged, with_eta))
    for _, heavy, enlarged, with_eta in sorted(candidates, key=lambda item: item[:2]):
        yield heavy, Enlarged(enlarged, with_eta, reducer.masters(enlarged, with_eta))


def _points(reducer: Reducer, family: FamilyDefinition, analysis: SectorAnalysis) -> int:
    """Critical points of the inequivalent sectors; one each where they are not isolated or too many."""
    counts = (
        critical_points(family, sector, reducer.primes[0], reducer.seed).count
        for sector in analysis.representatives
    )
    return sum(1 if count is None else count for count in counts)


def _inequivalent_lines(family: FamilyDefinition, analysis: SectorAnalysis) -> list[int]:
    """One line of each orbit under the symmetries of the sector of all lines."""
    everything = sum(1 << i for i in family.propagators)
    inside = lines_of(everything)
    first = {line: line for line in inside}
    for map_ in analysis.maps:
        if map_.source == map_.target == everything:
            for line, image in zip(inside, map_.lines, strict=True):
                low, high = sorted((first[line], first[image]))
                first = {key: low if value == high else value for key, value in first.items()}
    return sorted(set(first.values()))


def smooth_flow(
    reducer: Reducer, family: FamilyDefinition, heavy: int, place: Enlarged, wanted: Sequence[Powers]
) -> tuple[Flow, Enlarged]:
    """The differential equations in the better of two bases, without conditions yet, and the basis.

    Raises
    ------
    ReconstructionError
        If the engine finds no rational functions in either basis.
    """

    def flow_in(masters: Enlarged) -> Flow:
        return _open_flow(family, heavy, masters, reducer.derived(masters, MASS, wanted))

    first: Flow | ReconstructionError
    try:
        first = flow_in(place)
        rough = roughness(first, TRIAL)
        if rough < SMOOTH:
            return first, place
    except ReconstructionError as error:
        first = error
    other = dotted(reducer, place)
    if isinstance(first, ReconstructionError):
        return flow_in(other), other
    if other.masters == place.masters:
        return first, place
    try:
        second = flow_in(other)
    except ReconstructionError:
        return first, place
    return (second, other) if roughness(second, TRIAL) < rough else (first, place)


def dotted(reducer: Reducer, place: Enlarged) -> Enlarged:
    """The family with dotted masters."""
    masters = dotted_masters(
        place.family, place.analysis, place.masters, reducer.primes, reducer.seed, reducer.progress
    )
    return Enlarged(place.family, place.analysis, masters)


def _open_flow(family: FamilyDefinition, heavy: int, place: Enlarged, derived: Derived) -> Flow:
    return Flow(
        family.name,
        family.lines[heavy].text,
        heavy,
        family.dimension,
        place.masters,
        derived.matrix,
        (),
        derived.targets,
    )
