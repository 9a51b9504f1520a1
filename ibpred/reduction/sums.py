"""Sums of integrals, such as form factors of an amplitude, as combinations of masters."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from ibpred.errors import InputError
from ibpred.exact.rational import Polynomial, Rational
from ibpred.family.definition import FamilyDefinition
from ibpred.family.members import integral_text
from ibpred.family.units import integral_dimension, restore_unit, set_unit
from ibpred.identities.quantities import Integral, Quantity, combination
from ibpred.identities.rows import FamilyIdentities
from ibpred.progress import SILENT, Progress
from ibpred.reconstruct.functions import Evidence
from ibpred.reduction.deck import PLAIN_DECK, Deck
from ibpred.reduction.recording import Effort, coefficients, record_together
from ibpred.reduction.several import check_common_masters
from ibpred.reduction.wanted import Combination, check_powers
from ibpred.sectors.order import sector_of

Sum = Mapping[Integral, Rational]
"""Coefficients, in the full ring, of the integrals (number of the family, powers) of a sum."""


@dataclass(frozen=True)
class ReducedSums:
    """Sums of integrals as combinations of masters.

    Attributes
    ----------
    families
        Names of the families, crossed ones included.
    masters
        Number of the family and powers of each master.
    sums
        For each named sum its combination over the full ring.
    evidence, effort
        Of the reconstruction; None where every sum vanishes.
    """

    families: tuple[str, ...]
    masters: tuple[Integral, ...]
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


def sum_dimension(name: str, terms: Sum, members: Sequence[FamilyIdentities]) -> int:
    """Mass dimension (without its eps part) that all terms of a sum share.

    Raises
    ------
    InputError
        If they do not.
    """
    found: int | None = None
    for (number, powers), value in terms.items():
        if not value:
            continue
        family = members[number].family
        own = mass_dimension(value, family)
        if own is None:
            raise InputError(
                f"{name}: the coefficient {value} of {integral_text(family.name, powers)} is not "
                "homogeneous in mass dimension"
            )
        total = own + integral_dimension(family, powers)[0]
        if found is not None and total != found:
            raise InputError(
                f"{name}: the term with {integral_text(family.name, powers)} has mass dimension {total}, the "
                f"ones before have {found}"
            )
        found = total
    return found or 0


def reduce_sums(
    members: Sequence[FamilyIdentities],
    sums: Mapping[str, Sum],
    masters: Sequence[Integral],
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
    members
        The families, analysed together.
    sums
        Named sums; coefficients in the full ring, all terms of a sum of one mass dimension.
    masters
        The masters, as `find_common_masters` gives them.
    primes, seed
        Engine primes in the order in which they are used, and the seed of all random points.
    deck
        Where tapes are kept and played.
    progress
        Told about the parts of the work.

    Raises
    ------
    InputError
        If an integral does not fit its family, or a sum is not homogeneous.
    UnfinishedError
        If a sum does not reduce to the masters, or its coefficients cannot be reconstructed.
    """
    check_common_masters(members, masters)
    families = tuple(member.family.name for member in members)
    family = members[0].family
    dimensions: dict[str, int] = {}
    quantities: list[Quantity] = []
    ends: dict[int, str] = {}
    for name, terms in sums.items():
        for number, powers in terms:
            check_powers(members[number].family, powers)
        dimensions[name] = sum_dimension(name, terms, members)
        alive = {
            (number, tuple(powers)): set_unit(value, family)
            for (number, powers), value in terms.items()
            if value and sector_of(powers) not in members[number].analysis.zero
        }
        if alive:
            quantities += combination(name, alive, family.internal_ring, len(quantities))
            ends[len(quantities) - 1] = name
    found: dict[str, Combination] = dict.fromkeys(sums, ())
    if not quantities:
        return ReducedSums(families, tuple(masters), found, None, None)
    recorded = record_together(members, masters, quantities, primes, seed, deck, progress)
    values, evidence, effort = coefficients(family, recorded, primes, seed, deck, progress)
    rows: dict[str, list[tuple[int, Rational]]] = {}
    for (quantity, master), value in sorted(values.items()):
        name, (number, powers) = ends[quantity], masters[master]
        theirs, _ = integral_dimension(members[number].family, powers)
        rows.setdefault(name, []).append((master, restore_unit(value, dimensions[name] - theirs, family)))
    found |= {name: tuple(row) for name, row in rows.items()}
    return ReducedSums(families, tuple(masters), found, evidence, effort)
