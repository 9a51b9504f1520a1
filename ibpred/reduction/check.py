"""A reduction table checked by random identities, independently of how it was obtained.

At a random point modulo a prime that the reconstruction did not use, identities are written down
once more and every wanted integral is replaced by what the table says. The table is right only if
this leaves no relation among the masters.
"""

from __future__ import annotations

import random
from collections.abc import Callable, Sequence
from dataclasses import dataclass

from ibpred.errors import UnfinishedError
from ibpred.family.members import integral_text
from ibpred.family.units import set_unit
from ibpred.identities.quantities import Integral
from ibpred.identities.rows import FamilyIdentities
from ibpred.progress import SILENT, Progress
from ibpred.reduction.deepening import deepen
from ibpred.reduction.masters import random_point
from ibpred.reduction.several import quantity_of
from ibpred.reduction.wanted import Combination
from ibpred.sectors.order import sector_of

_ATTEMPTS = 3  # points at which a coefficient may be singular


@dataclass(frozen=True)
class TableCheck:
    """What was checked.

    Attributes
    ----------
    integrals
        Rows of the table that were compared.
    identities
        Equations written down for that.
    prime, point
        Where.
    """

    integrals: tuple[Integral, ...]
    identities: int
    prime: int
    point: tuple[int, ...]


def check_table(
    members: Sequence[FamilyIdentities],
    masters: Sequence[Integral],
    wanted: Sequence[Integral],
    row: Callable[[Integral], Combination],
    count: int,
    prime: int,
    seed: int,
    progress: Progress = SILENT,
) -> TableCheck:
    """Check random rows of a table by a fresh elimination of identities.

    Parameters
    ----------
    members
        The families, analysed together.
    masters
        The masters of the table.
    wanted
        The integrals of the table.
    row
        The table.
    count
        How many integrals to check; all of them if there are fewer.
    prime, seed
        An engine prime, and the seed of the choice and of the point.

    Raises
    ------
    UnfinishedError
        If a row is wrong (it is named), or identities do not reach the integrals.
    """
    source = random.Random(seed)
    chosen = sorted(source.sample(list(wanted), min(count, len(wanted))))
    alive = [(n, p) for n, p in chosen if sector_of(p) not in members[n].analysis.zero]
    progress.stage("check of the table")
    for integral in set(chosen) - set(alive):
        if row(integral):
            raise _wrong(members, integral, "it is scaleless and vanishes")
    point, expected = _values(members, alive, row, prime, seed)
    quantities = [quantity_of(members, integral) for integral in alive]
    known = {integral: i for i, integral in enumerate(masters)}
    found = deepen(members, quantities, range(len(quantities)), masters, point, prime, progress)
    names = [found.rows.integral(column) for column in found.found.masters]
    for integral, values, table in zip(alive, found.found.values.tolist(), expected, strict=True):
        fresh = {known[name]: v for name, v in zip(names, values, strict=True) if v}
        if fresh != {index: v for index, v in table.items() if v}:
            raise _wrong(members, integral, f"a fresh elimination modulo {prime} gives something else")
    return TableCheck(tuple(chosen), found.system.rows, prime, point)


def _wrong(members: Sequence[FamilyIdentities], integral: Integral, why: str) -> UnfinishedError:
    name = integral_text(members[integral[0]].family.name, integral[1])
    return UnfinishedError(
        f"the table is wrong at {name}: {why}; delete the work folder and reduce again, and please report it"
    )


def _values(
    members: Sequence[FamilyIdentities],
    alive: Sequence[Integral],
    row: Callable[[Integral], Combination],
    prime: int,
    seed: int,
) -> tuple[tuple[int, ...], list[dict[int, int]]]:
    """A random point, and the table's rows there, the unit set to one."""
    family = members[0].family
    combinations = [row(integral) for integral in alive]
    for attempt in range(_ATTEMPTS):
        point = random_point(family, prime, seed + attempt)
        try:
            return point, [
                {index: set_unit(value, family).modular(point, prime) for index, value in combination}
                for combination in combinations
            ]
        except ZeroDivisionError:
            continue
    raise UnfinishedError(f"{family.name}: the table is singular at {_ATTEMPTS} random points modulo {prime}")
