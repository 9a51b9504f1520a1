"""Identities deep enough for what is wanted: seeds grow until all of it reduces to the masters."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from ibpred.elimination.discovery import Discovery, Reduced, discover, reduced
from ibpred.elimination.system import SparseSystem
from ibpred.errors import UnfinishedError
from ibpred.family.members import integral_text
from ibpred.identities.quantities import Integral, Quantity
from ibpred.identities.rows import FamilyIdentities, IntegralRows, write_rows
from ibpred.identities.seeding import SeedPlan
from ibpred.progress import Progress
from ibpred.reduction.seeds import LARGEST_SYSTEM, Growth, expected_entries, growths, plans_for
from ibpred.reduction.system import sparse_system

_NAMED = 5  # how many quantities or integrals an error message lists
_FUTILE_DOTS = 2  # added without effect, besides some rank, before seeds are taken to be deep enough


@dataclass(frozen=True)
class Deepened:
    """Identities that reduce some quantities to the masters, and the reduction at one point.

    Attributes
    ----------
    rows, system
        The identities.
    columns
        Columns of the quantities asked for.
    discovery
        The elimination of the system at the point.
    found
        What it makes of the columns.
    """

    rows: IntegralRows
    system: SparseSystem
    columns: tuple[int, ...]
    discovery: Discovery
    found: Reduced


@dataclass(frozen=True)
class _Shortfall:
    """What did not reduce: names of quantities, and the integrals besides the masters that they contain."""

    growth: Growth
    left: tuple[str, ...]
    foreign: tuple[Integral, ...]


def deepen(
    members: Sequence[FamilyIdentities],
    quantities: Sequence[Quantity],
    asked: Sequence[int],
    masters: Sequence[Integral],
    point: Sequence[int],
    prime: int,
    progress: Progress,
) -> Deepened:
    """Write identities of growing depth until the quantities reduce to the masters.

    Parameters
    ----------
    members
        The families, analysed together.
    quantities
        Unknowns to be defined.
    asked
        Numbers of those that are to be reduced.
    masters
        The masters.
    point, prime
        Where to eliminate.
    progress
        Told about each step.

    Raises
    ------
    UnfinishedError
        If deeper identities change nothing, or would be more than `LARGEST_SYSTEM`; what is left is named.
    """
    names = [quantities[number].name for number in asked]
    wanted = [integral for quantity in quantities for integral in quantity.integrals]
    known = set(masters)
    tried: set[tuple[tuple[int, int, int, int], ...]] = set()
    short: list[_Shortfall] = []
    for growth in growths():
        plans = plans_for(members, wanted, growth)
        signature = _signature(plans)
        if signature in tried:
            continue
        if short and expected_entries(members, plans) > LARGEST_SYSTEM:
            reason = f"deeper identities would have more than {LARGEST_SYSTEM} entries"
            raise _unfinished(members, short[-1], len(known), reason)
        tried.add(signature)
        rows = write_rows(members, plans, quantities, masters)
        system = sparse_system(rows)
        columns = tuple(rows.columns - rows.quantities + number for number in asked)
        discovery = discover(system, point, prime)
        found = reduced(discovery, columns)
        progress.advance(len(tried), None)
        missing = _shortfall(rows, found, names, known, growth)
        if not missing.left:
            return Deepened(rows, system, columns, discovery, found)
        short.append(missing)
        if _futile(short):
            raise _unfinished(members, missing, len(known), "deeper identities do not change that")
    raise AssertionError("there is always another step")


def _signature(plans: Sequence[SeedPlan]) -> tuple[tuple[int, int, int, int], ...]:
    return tuple(
        (number, sector, depth.dots, depth.rank)
        for number, plan in enumerate(plans)
        for sector, depth in sorted(plan.items())
    )


def _shortfall(
    rows: IntegralRows, found: Reduced, names: Sequence[str], known: set[Integral], growth: Growth
) -> _Shortfall:
    integrals = [rows.integral(column) for column in found.masters]
    foreign = [i for i, integral in enumerate(integrals) if integral not in known]
    bad = np.flatnonzero(found.values[:, foreign].any(axis=1))
    used = np.any(found.values != 0, axis=0)
    return _Shortfall(
        growth,
        tuple(names[int(i)] for i in bad),
        tuple(integrals[i] for i in foreign if used[i]),
    )


def _futile(short: Sequence[_Shortfall]) -> bool:
    """Whether the same integrals stayed while both dots and rank were added."""
    last = short[-1]
    for before in reversed(short[:-1]):
        if (before.left, before.foreign) != (last.left, last.foreign):
            return False
        if last.growth.dots - before.growth.dots >= _FUTILE_DOTS and last.growth.rank > before.growth.rank:
            return True
    return False


def _unfinished(
    members: Sequence[FamilyIdentities], missing: _Shortfall, masters: int, reason: str
) -> UnfinishedError:
    names = ", ".join(member.family.name for member in members)
    others = [integral_text(members[n].family.name, powers) for n, powers in missing.foreign]
    return UnfinishedError(
        f"{names}: {_listed(missing.left)} did not reduce to the {masters} masters alone but contain also "
        f"{_listed(others)}; {reason}; check the list of masters"
    )


def _listed(names: Sequence[str]) -> str:
    more = f" and {len(names) - _NAMED} more" if len(names) > _NAMED else ""
    return ", ".join(names[:_NAMED]) + more
