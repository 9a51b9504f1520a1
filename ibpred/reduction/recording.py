"""From wanted quantities to a tape that expresses them in the masters, and to exact coefficients."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from ibpred.digest import digest
from ibpred.elimination.discovery import Reduced, discover, reduced
from ibpred.elimination.pruning import prune
from ibpred.elimination.recording import record_pruned
from ibpred.elimination.replaying import check_tape
from ibpred.elimination.system import SparseSystem
from ibpred.elimination.tape import Tape
from ibpred.errors import InputError, UnfinishedError
from ibpred.exact.codec import to_data
from ibpred.exact.rational import Rational
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.identities.quantities import Integral, Quantity, fingerprint
from ibpred.identities.rows import FamilyIdentities, IntegralRows, family_identities, write_rows
from ibpred.progress import SILENT, Progress
from ibpred.reconstruct.functions import Evidence, reconstruct
from ibpred.reconstruct.plan import Plan
from ibpred.reduction.deck import PLAIN_DECK, Deck, Recorded
from ibpred.reduction.masters import random_point
from ibpred.reduction.seeds import GROWTH, plans_for
from ibpred.reduction.system import sparse_system
from ibpred.sectors.analysis import SectorAnalysis

_NAMED = 5  # how many quantities an error message lists
_ATTEMPTS = 3  # random points at which recording is tried


@dataclass(frozen=True)
class Effort:
    """What a reduction took.

    Attributes
    ----------
    rows, columns
        Equations written down, and the unknowns in them.
    multiply_adds
        Of one replayed sample.
    samples
        Sample points used by the reconstruction.
    """

    rows: int
    columns: int
    multiply_adds: int
    samples: int


def record_quantities(
    family: FamilyDefinition,
    analysis: SectorAnalysis,
    masters: Sequence[Powers],
    quantities: Sequence[Quantity],
    primes: Sequence[int],
    seed: int,
    deck: Deck = PLAIN_DECK,
    progress: Progress = SILENT,
) -> Recorded:
    """Write identities deep enough that all quantities reduce to the masters, and record them.

    Parameters
    ----------
    family, analysis
        The family and its sectors.
    masters
        The masters, as `find_masters` gives them.
    quantities
        What is to be expressed in the masters.
    primes, seed
        Engine primes: the first one for the record, the second one to validate it; the seed of the random
        points.
    deck
        Where the tape may be kept already.
    progress
        Told about each depth that is tried.

    Raises
    ------
    UnfinishedError
        If the identities tried leave quantities that do not reduce to the masters alone, or no tape
        agrees with a fresh elimination elsewhere.
    """
    members = family_identities([family], [analysis])
    return record_together(
        members, [(0, tuple(m)) for m in masters], quantities, primes, seed, deck, progress
    )


def record_together(
    members: Sequence[FamilyIdentities],
    masters: Sequence[Integral],
    quantities: Sequence[Quantity],
    primes: Sequence[int],
    seed: int,
    deck: Deck = PLAIN_DECK,
    progress: Progress = SILENT,
) -> Recorded:
    """`record_quantities` for several families that were analysed together.

    Parameters
    ----------
    members
        The families.
    masters
        The masters, as `find_common_masters` gives them.
    quantities, primes, seed, deck, progress
        As `record_quantities`.

    Raises
    ------
    UnfinishedError
        As `record_quantities`.
    """
    key = digest(
        [
            "tape",
            [[to_data(member.family), sorted(member.analysis.zero)] for member in members],
            to_data(masters),
            fingerprint(quantities),
            [*primes[:2], seed],
        ]
    )
    return deck.recorded(key, lambda: _recorded(members, masters, quantities, primes, seed, progress))


def _recorded(
    members: Sequence[FamilyIdentities],
    masters: Sequence[Integral],
    quantities: Sequence[Quantity],
    primes: Sequence[int],
    seed: int,
    progress: Progress,
) -> Recorded:
    family = members[0].family
    names = ", ".join(member.family.name for member in members)
    point = random_point(family, primes[0], seed)
    wanted = [integral for quantity in quantities for integral in quantity.integrals]
    known, asked = set(masters), _asked(quantities)
    progress.stage("identities")
    tried: set[tuple[tuple[int, int, int, int], ...]] = set()
    left: tuple[str, ...] = ()
    for step, growth in enumerate(GROWTH):
        plans = plans_for(members, wanted, growth)
        signature = tuple(
            (number, sector, d.dots, d.rank)
            for number, plan in enumerate(plans)
            for sector, d in sorted(plan.items())
        )
        if signature in tried:
            continue
        tried.add(signature)
        rows = write_rows(members, plans, quantities, masters)
        system = sparse_system(rows)
        found = reduced(discover(system, point, primes[0]), _columns(rows, asked))
        left = _left_over(rows, found, [quantities[q].name for q in asked], known)
        progress.advance(step + 1, len(GROWTH))
        if not left:
            tape = _record(family, system, _columns(rows, asked), primes, seed)
            return _labelled(rows, system, tape, masters, quantities)
    more = f" and {len(left) - _NAMED} more" if len(left) > _NAMED else ""
    raise UnfinishedError(
        f"{names}: {', '.join(left[:_NAMED])}{more} did not reduce to the {len(known)} masters "
        "with the deepest identities tried; check the list of masters"
    )


def _asked(quantities: Sequence[Quantity]) -> list[int]:
    """Numbers of the quantities that are no parts of others."""
    parts = {part for quantity in quantities for part, _ in quantity.parts}
    return [q for q in range(len(quantities)) if q not in parts]


def _columns(rows: IntegralRows, numbers: Sequence[int]) -> list[int]:
    """Columns of quantities."""
    first = rows.columns - rows.quantities
    return [first + q for q in numbers]


def _left_over(
    rows: IntegralRows, found: Reduced, names: Sequence[str], known: set[Integral]
) -> tuple[str, ...]:
    """Names of the quantities whose reduction contains more than masters."""
    foreign = [i for i, column in enumerate(found.masters) if rows.integral(column) not in known]
    bad = np.flatnonzero(found.values[:, foreign].any(axis=1))
    return tuple(names[int(i)] for i in bad)


def _record(
    family: FamilyDefinition, system: SparseSystem, columns: Sequence[int], primes: Sequence[int], seed: int
) -> Tape:
    """Record at a random point, validate against the whole system at another point and prime."""
    for attempt in range(_ATTEMPTS):
        point = random_point(family, primes[0], seed + 2 * attempt)
        elsewhere = random_point(family, primes[1], seed + 2 * attempt + 1)
        tape = record_pruned(prune(system, discover(system, point, primes[0]), columns), point, primes[0])
        if check_tape(system, tape, elsewhere, primes[1]):
            return tape
    raise UnfinishedError(
        f"{family.name}: recorded at {_ATTEMPTS} random points, the elimination never agreed with a fresh "
        f"one modulo {primes[1]}; try another seed"
    )


def _labelled(
    rows: IntegralRows,
    system: SparseSystem,
    tape: Tape,
    masters: Sequence[Integral],
    quantities: Sequence[Quantity],
) -> Recorded:
    order = {integral: i for i, integral in enumerate(masters)}
    first = rows.columns - rows.quantities
    entries = []
    for target, source in tape.outputs.tolist():
        integral = rows.integral(tape.masters[source])
        entries.append((tape.wanted[target] - first, order[integral]))
    return Recorded(
        tuple(powers for _, powers in masters),
        tuple(number for number, _ in masters),
        tuple(quantity.name for quantity in quantities),
        tape,
        tuple(entries),
        system.rows,
        rows.columns,
    )


def coefficients(
    family: FamilyDefinition,
    recorded: Recorded,
    primes: Sequence[int],
    seed: int,
    deck: Deck = PLAIN_DECK,
    progress: Progress = SILENT,
) -> tuple[Mapping[tuple[int, int], Rational], Evidence | None, Effort]:
    """Reconstruct the coefficients that a tape yields, the unit set to one.

    Returns
    -------
    values
        (quantity, master) -> coefficient in the internal ring, zeros left out.
    evidence
        Of the reconstruction; None where there was nothing to reconstruct.
    effort
        What it took.

    Raises
    ------
    ReconstructionError
        If the samples do not determine rational functions.
    """
    size = (recorded.rows, recorded.columns, recorded.tape.multiply_adds)
    if not recorded.entries:
        return {}, None, Effort(*size, 0)
    report = _Report(progress)
    found = reconstruct(
        deck.sampler(recorded.tape),
        primes,
        seed,
        family.internal_ring,
        notes=deck.notes(recorded.tape),
        watch=report,
    )
    values = {entry: value for entry, value in zip(recorded.entries, found.entries, strict=True) if value}
    return values, found.evidence, Effort(*size, found.evidence.samples)


class _Report:
    """Hands the reconstruction's steps on to a progress object."""

    def __init__(self, progress: Progress) -> None:
        self.progress = progress
        self.step = ""

    def samples(self, step: str, done: int, expected: int | None) -> None:
        if step != self.step:
            self.step = step
            self.progress.stage(f"samples: {step}")
        self.progress.advance(done, expected)

    def plan(self, plan: Plan, done: int) -> None:
        self.progress.plan(plan.text(), done, plan.samples)


def check_masters(family: FamilyDefinition, masters: Sequence[Powers]) -> None:
    """Check that masters are given and distinct.

    Raises
    ------
    InputError
        Otherwise.
    """
    if not masters:
        raise InputError(f"{family.name}: no masters are given")
    if len(set(masters)) != len(masters):
        raise InputError(f"{family.name}: a master is listed twice")
