"""Wanted integrals as combinations of masters, exactly."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from ibpred.exact.rational import Rational
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.family.units import integral_dimension, restore_unit
from ibpred.identities.quantities import Quantity
from ibpred.progress import SILENT, Progress
from ibpred.reconstruct.functions import Evidence
from ibpred.reduction.recording import (
    Effort,
    Sampling,
    TapeSampler,
    check_masters,
    coefficients,
    record_quantities,
)
from ibpred.reduction.wanted import check_powers
from ibpred.sectors.analysis import SectorAnalysis
from ibpred.sectors.order import sector_of

Combination = tuple[tuple[int, Rational], ...]
"""(index of a master, coefficient), masters ascending, no zero coefficients."""


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
    evidence
        Of the reconstruction; None where nothing had to be reconstructed.
    effort
        What it took; None likewise.
    """

    family: str
    masters: tuple[Powers, ...]
    reductions: Mapping[Powers, Combination]
    evidence: Evidence | None
    effort: Effort | None


def single(family: FamilyDefinition, powers: Powers) -> Quantity:
    """The quantity that is one integral."""
    one = {(0,) * len(family.internal_ring.names): 1}
    return Quantity(f"{family.name}({','.join(map(str, powers))})", one, ((powers, one),))


def reduce_integrals(
    family: FamilyDefinition,
    analysis: SectorAnalysis,
    wanted: Sequence[Powers],
    masters: Sequence[Powers],
    primes: Sequence[int],
    seed: int,
    sampling: Sampling = TapeSampler,
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
    sampling
        How the tape is sampled.
    progress
        Told about the parts of the work.

    Raises
    ------
    InputError
        If an integral has the wrong number of powers or a numerator with positive power.
    UnfinishedError
        If integrals do not reduce to the masters, or the coefficients cannot be reconstructed.
    """
    check_masters(family, masters)
    asked = tuple(dict.fromkeys(tuple(int(a) for a in powers) for powers in wanted))
    for powers in asked:
        check_powers(family, powers)
    alive = tuple(powers for powers in asked if sector_of(powers) not in analysis.zero)
    reductions: dict[Powers, Combination] = dict.fromkeys(asked, ())
    if not alive:
        return ReductionTable(family.name, tuple(masters), reductions, None, None)
    recorded = record_quantities(
        family, analysis, masters, [single(family, powers) for powers in alive], primes, seed, progress
    )
    values, evidence, effort = coefficients(family, recorded, primes, seed, sampling, progress)
    rows: dict[int, list[tuple[int, Rational]]] = {}
    for (quantity, master), value in sorted(values.items()):
        own, _ = integral_dimension(family, alive[quantity])
        theirs, _ = integral_dimension(family, recorded.masters[master])
        rows.setdefault(quantity, []).append((master, restore_unit(value, own - theirs, family)))
    for quantity, row in rows.items():
        reductions[alive[quantity]] = tuple(row)
    return ReductionTable(family.name, recorded.masters, reductions, evidence, effort)
