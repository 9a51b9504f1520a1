"""From wanted quantities to a tape that expresses them in the masters, and to exact coefficients."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from ibpred.digest import digest
from ibpred.elimination.discovery import discover
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
from ibpred.identities.rows import FamilyIdentities, IntegralRows, family_identities
from ibpred.progress import SILENT, Progress
from ibpred.reconstruct.functions import Evidence, reconstruct
from ibpred.reconstruct.plan import Plan
from ibpred.reduction.deck import PLAIN_DECK, Deck, Recorded
from ibpred.reduction.deepening import Deepened, deepen
from ibpred.reduction.masters import random_point
from ibpred.sectors.analysis import SectorAnalysis

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
    progress.stage("identities")
    point = random_point(family, primes[0], seed)
    asked = _asked(quantities)
    deep = deepen(members, quantities, asked, masters, point, primes[0], progress)
    tape = _record(family, deep, primes, seed)
    return _labelled(deep.rows, deep.system, tape, masters, quantities)


def _asked(quantities: Sequence[Quantity]) -> list[int]:
    """Numbers of the quantities that are no parts of others."""
    parts = {part for quantity in quantities for part, _ in quantity.parts}
    return [q for q in range(len(quantities)) if q not in parts]


def _record(family: FamilyDefinition, deep: Deepened, primes: Sequence[int], seed: int) -> Tape:
    """Record at a random point, validate against the whole system at another point and prime."""
    discovery = deep.discovery
    for attempt in range(_ATTEMPTS):
        elsewhere = random_point(family, primes[1], seed + 2 * attempt + 1)
        pruned = prune(deep.system, discovery, deep.columns)
        tape = record_pruned(pruned, discovery.point, discovery.prime)
        if check_tape(deep.system, tape, elsewhere, primes[1]):
            return tape
        discovery = discover(deep.system, random_point(family, primes[0], seed + 2 * attempt + 2), primes[0])
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
