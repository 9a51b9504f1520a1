"""Wanted integrals of several families as combinations of their common masters."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

from ibpred.errors import InputError
from ibpred.exact.rational import Rational
from ibpred.family.units import integral_dimension, restore_unit
from ibpred.identities.quantities import Integral, Quantity
from ibpred.identities.rows import FamilyIdentities
from ibpred.progress import SILENT, Progress
from ibpred.reconstruct.functions import Evidence
from ibpred.reduction.deck import PLAIN_DECK, Deck
from ibpred.reduction.recording import Effort, coefficients, record_together
from ibpred.reduction.wanted import Combination, check_powers, single
from ibpred.sectors.order import sector_of


@dataclass(frozen=True)
class CommonTable:
    """Integrals of several families as combinations of common masters.

    Attributes
    ----------
    families
        Names of the families, crossed ones included.
    masters
        Number of the family and powers of each master.
    reductions
        For each wanted integral, in the order asked, its combination over Q(d, invariants); empty for an
        integral that vanishes.
    evidence, effort
        Of each reconstruction that was needed: one, or one for each cut.
    """

    families: tuple[str, ...]
    masters: tuple[Integral, ...]
    reductions: Mapping[Integral, Combination]
    evidence: tuple[Evidence, ...]
    effort: tuple[Effort, ...]


def asked_for(members: Sequence[FamilyIdentities], wanted: Sequence[Integral]) -> tuple[Integral, ...]:
    """The wanted integrals, each once.

    Raises
    ------
    InputError
        If an integral does not fit its family.
    """
    asked = tuple(dict.fromkeys((number, tuple(int(a) for a in powers)) for number, powers in wanted))
    for number, powers in asked:
        check_powers(members[number].family, powers)
    return asked


def check_common_masters(members: Sequence[FamilyIdentities], masters: Sequence[Integral]) -> None:
    """Check that masters are given and distinct.

    Raises
    ------
    InputError
        Otherwise.
    """
    names = ", ".join(member.family.name for member in members)
    if not masters:
        raise InputError(f"{names}: no masters are given")
    if len(set(masters)) != len(masters):
        raise InputError(f"{names}: a master is listed twice")


def reduce_together(
    members: Sequence[FamilyIdentities],
    wanted: Sequence[Integral],
    masters: Sequence[Integral],
    primes: Sequence[int],
    seed: int,
    deck: Deck = PLAIN_DECK,
    progress: Progress = SILENT,
) -> CommonTable:
    """Reduce integrals of several families to common masters.

    Parameters
    ----------
    members
        The families, analysed together.
    wanted
        The integrals; those of zero sectors reduce to nothing.
    masters
        The masters, as `find_common_masters` gives them.
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
    check_common_masters(members, masters)
    asked = asked_for(members, wanted)
    alive = tuple((n, powers) for n, powers in asked if sector_of(powers) not in members[n].analysis.zero)
    reductions: dict[Integral, Combination] = dict.fromkeys(asked, ())
    families = tuple(member.family.name for member in members)
    if not alive:
        return CommonTable(families, tuple(masters), reductions, (), ())
    quantities = [quantity_of(members, integral) for integral in alive]
    recorded = record_together(members, masters, quantities, primes, seed, deck, progress)
    family = members[0].family
    values, evidence, effort = coefficients(family, recorded, primes, seed, deck, progress)
    rows: dict[int, list[tuple[int, Rational]]] = {}
    for (quantity, master), value in sorted(values.items()):
        # all families have the kinematics of the first, but lines of their own dimensions
        own, _ = integral_dimension(members[alive[quantity][0]].family, alive[quantity][1])
        number, powers = masters[master]
        theirs, _ = integral_dimension(members[number].family, powers)
        rows.setdefault(quantity, []).append((master, restore_unit(value, own - theirs, family)))
    for quantity, row in rows.items():
        reductions[alive[quantity]] = tuple(row)
    return CommonTable(
        families, tuple(masters), reductions, () if evidence is None else (evidence,), (effort,)
    )


def quantity_of(members: Sequence[FamilyIdentities], integral: Integral) -> Quantity:
    """The quantity that is one integral."""
    number, powers = integral
    return replace(single(members[number].family, powers), families=(number,))
