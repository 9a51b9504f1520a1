"""Reduction on one cut after the other, with the same table as result.

Integrals in sectors that do not contain the lines of a cut are dropped; what is left is the reduction
modulo these integrals, a smaller system that gives the coefficients of the masters on the cut. (For
spanning sets of cuts see Larsen, Zhang, arXiv:1511.01071; Böhm et al., arXiv:1805.01873.) A cut here
is a class of equivalent sectors rather than one set of lines: then all maps between sectors stay
true, and the masters are those of the uncut reduction.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

from ibpred.identities.quantities import Integral
from ibpred.identities.rows import FamilyIdentities
from ibpred.progress import SILENT, Progress
from ibpred.reconstruct.functions import Evidence
from ibpred.reduction.deck import PLAIN_DECK, Deck
from ibpred.reduction.recording import (
    Effort,
)
from ibpred.reduction.several import (
    CommonTable,
    asked_for,
    check_common_masters,
    reduce_together,
)
from ibpred.reduction.wanted import Combination
from ibpred.sectors.order import sector_of

Place = tuple[int, int]
"""Number of a family and a sector of it."""


@dataclass(frozen=True)
class Cut:
    """A class of equivalent sectors, of one or several families, whose lines are cut."""

    sectors: frozenset[Place]

    def keeps(self, place: Place) -> bool:
        """Whether a sector contains all lines of some sector of the cut."""
        number, sector = place
        return any(n == number and sector & cut == cut for n, cut in self.sectors)


def sector_classes(members: Sequence[FamilyIdentities]) -> Mapping[Place, frozenset[Place]]:
    """For each sector that does not vanish all those equivalent to it, over all families."""
    number_of = {member.family.name: number for number, member in enumerate(members)}
    leader: dict[Place, Place] = {}

    def first(place: Place) -> Place:
        while leader[place] != place:
            place = leader[place]
        return place

    for number, member in enumerate(members):
        for sector in member.analysis.nonzero:
            leader[number, sector] = (number, sector)
    for number, member in enumerate(members):
        for map_ in member.analysis.maps:
            a, b = first((number, map_.source)), first((number_of[map_.target_family], map_.target))
            leader[max(a, b)] = min(a, b)
    classes: dict[Place, set[Place]] = {}
    for place in leader:
        classes.setdefault(first(place), set()).add(place)
    return {place: frozenset(found) for found in classes.values() for place in found}


def spanning_cuts(members: Sequence[FamilyIdentities], masters: Sequence[Integral]) -> tuple[Cut, ...]:
    """The fewest classes of master sectors such that every master's sector contains one of them.

    These are the sectors of masters that contain no other master's sector, up to equivalence.
    """
    classes = sector_classes(members)
    cuts: list[Cut] = []
    places = {(number, sector_of(powers)) for number, powers in masters}
    for place in sorted(places, key=lambda p: (p[1].bit_count(), p)):
        if not any(cut.keeps(other) for cut in cuts for other in classes[place]):
            cuts.append(Cut(classes[place]))
    return tuple(cuts)


def on_cut(members: Sequence[FamilyIdentities], cut: Cut) -> tuple[FamilyIdentities, ...]:
    """The families with all integrals off the cut set to zero."""
    found = []
    for number, member in enumerate(members):
        analysis = member.analysis
        off = frozenset(sector for sector in analysis.nonzero if not cut.keeps((number, sector)))
        kept = [tuple(s for s in members if s not in off) for members in analysis.classes]
        restricted = replace(
            analysis,
            zero=analysis.zero | off,
            classes=tuple(sectors for sectors in kept if sectors),
            maps=tuple(map_ for map_ in analysis.maps if map_.source not in off),
        )
        found.append(replace(member, analysis=restricted))
    return tuple(found)


def reduce_by_cuts(
    members: Sequence[FamilyIdentities],
    wanted: Sequence[Integral],
    masters: Sequence[Integral],
    primes: Sequence[int],
    seed: int,
    deck: Deck = PLAIN_DECK,
    progress: Progress = SILENT,
) -> CommonTable:
    """The table of `reduce_together`, obtained on a spanning set of cuts.

    Each cut needs less memory than the whole; all of them together take longer.

    Parameters
    ----------
    members, wanted, masters, primes, seed, deck, progress
        As `reduce_together`.

    Raises
    ------
    InputError, UnfinishedError
        As `reduce_together`.
    """
    check_common_masters(members, masters)
    asked = asked_for(members, wanted)
    found: dict[Integral, dict[int, Combination]] = {integral: {} for integral in asked}
    evidence: list[Evidence] = []
    effort: list[Effort] = []
    done: set[int] = set()
    cuts = spanning_cuts(members, masters)
    for step, cut in enumerate(cuts):
        progress.stage(f"cut {step + 1} of {len(cuts)}")
        on = [i for i, (number, powers) in enumerate(masters) if cut.keeps((number, sector_of(powers)))]
        part = reduce_together(
            on_cut(members, cut), asked, [masters[i] for i in on], primes, seed, deck, progress
        )
        evidence += part.evidence
        effort += part.effort
        for integral, combination in part.reductions.items():
            for place, value in combination:
                if on[place] not in done:
                    found[integral][on[place]] = ((on[place], value),)
        done.update(on)
    families = tuple(member.family.name for member in members)
    reductions = {
        integral: tuple(entry for _, (entry,) in sorted(parts.items())) for integral, parts in found.items()
    }
    return CommonTable(families, tuple(masters), reductions, tuple(evidence), tuple(effort))
