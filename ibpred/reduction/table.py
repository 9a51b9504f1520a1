"""Wanted integrals as combinations of masters, exactly."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.identities.rows import family_identities
from ibpred.progress import SILENT, Progress
from ibpred.reconstruct.functions import Evidence
from ibpred.reduction.deck import PLAIN_DECK, Deck
from ibpred.reduction.recording import Effort
from ibpred.reduction.several import reduce_together
from ibpred.reduction.wanted import Combination
from ibpred.sectors.analysis import SectorAnalysis


@dataclass(frozen=True)
class ReductionTable:
    """Integrals as combinations of masters.

    Attributes
    ----------
    family
        Name of the family.
    masters
        The masters.
    reductions
        For each wanted integral, in the order asked, its combination over the family's full ring; empty for
        an integral that vanishes.
    evidence, effort
        Of each reconstruction that was needed, and what it took.
    """

    family: str
    masters: tuple[Powers, ...]
    reductions: Mapping[Powers, Combination]
    evidence: tuple[Evidence, ...]
    effort: tuple[Effort, ...]


def reduce_integrals(
    family: FamilyDefinition,
    analysis: SectorAnalysis,
    wanted: Sequence[Powers],
    masters: Sequence[Powers],
    primes: Sequence[int],
    seed: int,
    deck: Deck = PLAIN_DECK,
    progress: Progress = SILENT,
) -> ReductionTable:
    """Reduce integrals to masters.

    Parameters
    ----------
    family, analysis
        The family and its sectors.
    wanted
        Powers of the integrals; those of zero sectors reduce to nothing.
    masters
        The masters, as `find_masters` gives them.
    primes, seed
        Engine primes in the order in which they are used (the first two record and validate the
        tape), and the seed of all random points.
    deck
        Where tapes are kept and played.
    progress
        Told about the parts of the work.

    Raises
    ------
    InputError
        If an integral has the wrong number of powers or a numerator with positive power.
    UnfinishedError
        If integrals do not reduce to the masters, or the coefficients cannot be reconstructed.
    """
    members = family_identities([family], [analysis])
    table = reduce_together(
        members,
        [(0, tuple(powers)) for powers in wanted],
        [(0, tuple(powers)) for powers in masters],
        primes,
        seed,
        deck,
        progress,
    )
    return ReductionTable(
        family.name,
        tuple(powers for _, powers in table.masters),
        {powers: row for (_, powers), row in table.reductions.items()},
        table.evidence,
        table.effort,
    )
