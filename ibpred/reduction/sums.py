"""Sums of integrals, such as form factors of an amplitude, as combinations of masters."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from ibpred.errors import InputError
from ibpred.exact.rational import Polynomial, Rational
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.family.units import integral_dimension, restore_unit, set_unit
from ibpred.identities.quantities import combination
from ibpred.progress import SILENT, Progress
from ibpred.reconstruct.functions import Evidence
from ibpred.reduction.deck import PLAIN_DECK, Deck
from ibpred.reduction.recording import (
    Effort,
    check_masters,
    coefficients,
    record_quantities,
)
from ibpred.reduction.wanted import Combination, check_powers
from ibpred.sectors.analysis import SectorAnalysis
from ibpred.sectors.order import sector_of

Sum = Mapping[Powers, Rational]
"""Coefficients, in the family's full ring, of the integrals of a sum."""


@dataclass(frozen=True)
class ReducedSums:
    """Sums of integrals as combinations of masters.

    Attributes
    ----------
    family
        Name of the family.
    masters
        The masters.
    sums
        For each named sum its combination over the family's full ring.
    evidence, effort
        Of the reconstruction; None where every sum vanishes.
    """

    family: str
    masters: tuple[Powers, ...]
    sums: Mapping[str, Combination]
    evidence: Evidence | None
    effort: Effort | None


def mass_dimension(value: Rational, family: FamilyDefinition) -> int | None:
    """Mass dimension of a function of d and the invariants; None where it is not homogeneous.

    Zero counts as homogeneous of dimension zero.
    """
    sizes = {invariant.name: invariant.dimension for invariant in family.invariants}
    weights = [sizes.get(name, 0) for name in value.ring.names]

    def dimensions(polynomial: Polynomial) -> set[int]:
        return {
            sum(w * int(e) for w, e in zip(weights, exponents, strict=True))
            for exponents in polynomial.to_dict()
        }

    if not value:
        return 0
    above, below = dimensions(value.numerator), dimensions(value.denominator)
    if len(above) != 1 or len(below) != 1:
        return None
    return above.pop() - below.pop()


def sum_dimension(name: str, terms: Sum, family: FamilyDefinition) -> int:
    """Mass dimension (without its eps part) that all terms of a sum share.

    Raises
    ------
    InputError
        If they do not.
    """
    found: int | None = None
    for powers, value in terms.items():
        if not value:
            continue
        own = mass_dimension(value, family)
        if own is None:
            raise InputError(
                f"{name}: the coefficient {value} of {powers} is not homogeneous in mass dimension"
            )
        total = own + integral_dimension(family, powers)[0]
        if found is not None and total != found:
            raise InputError(
                f"{name}: the term with {powers} has mass dimension {total}, the ones before have {found}"
            )
        found = total
    return found or 0


def reduce_sums(
    family: FamilyDefinition,
    analysis: SectorAnalysis,
    sums: Mapping[str, Sum],
    masters: Sequence[Powers],
    primes: Sequence[int],
    seed: int,
    deck: Deck = PLAIN_DECK,
    progress: Progress = SILENT,
) -> ReducedSums:
    """Reduce sums of integrals to masters, without reducing the integrals one by one.

    The sums are unknowns of the recorded elimination, so only their final coefficients are
    reconstructed.

    Parameters
    ----------
    family, analysis
        The family and its sectors.
    sums
        Named sums; coefficients in the family's full ring, all terms of one mass dimension.
    masters
        The masters, as `find_masters` gives them.
    primes, seed
        Engine primes in the order in which they are used, and the seed of all random points.
    deck
        Where tapes are kept and played.
    progress
        Told about the parts of the work.

    Raises
    ------
    InputError
        If an integral does not fit the family, or a sum is not homogeneous.
    UnfinishedError
        If a sum does not reduce to the masters, or its coefficients cannot be reconstructed.
    """
    check_masters(family, masters)
    dimensions: list[int] = []
    quantities = []
    for name, terms in sums.items():
        for powers in terms:
            check_powers(family, powers)
        alive = {
            tuple(powers): set_unit(value, family)
            for powers, value in terms.items()
            if value and sector_of(powers) not in analysis.zero
        }
        dimensions.append(sum_dimension(name, terms, family))
        quantities.append(combination(name, alive, family.internal_ring))
    if not any(quantity.terms for quantity in quantities):
        return ReducedSums(family.name, tuple(masters), dict.fromkeys(sums, ()), None, None)
    recorded = record_quantities(family, analysis, masters, quantities, primes, seed, deck, progress)
    values, evidence, effort = coefficients(family, recorded, primes, seed, deck, progress)
    rows: dict[int, list[tuple[int, Rational]]] = {}
    for (quantity, master), value in sorted(values.items()):
        theirs, _ = integral_dimension(family, recorded.masters[master])
        rows.setdefault(quantity, []).append(
            (master, restore_unit(value, dimensions[quantity] - theirs, family))
        )
    found = {name: tuple(rows.get(i, ())) for i, name in enumerate(sums)}
    return ReducedSums(family.name, recorded.masters, found, evidence, effort)
