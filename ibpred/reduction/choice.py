"""A choice of masters whose differential equations have denominators that split.

A denominator splits if it is a polynomial in d times a polynomial in the invariants. Some masters of a
sector make it split and others mix d with the invariants or add letters that mean nothing (A.V. Smirnov,
V.A. Smirnov, arXiv:2002.08042; Usovitsch, arXiv:2002.08173). Here each sector with several masters is
looked at on its maximal cut, where its identities are few, and sets of simple integrals are compared by
samples of the differential equation along one line in d and one in the invariants.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import partial
from itertools import combinations, islice

import numpy as np
from numpy.typing import NDArray

from ibpred.errors import UnfinishedError
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.identities.derivatives import derivative_templates
from ibpred.identities.quantities import Integral, template_at
from ibpred.identities.rows import FamilyIdentities, family_identities
from ibpred.identities.seeding import Depth, seeds_of_sector
from ibpred.identities.templates import Template
from ibpred.progress import SILENT, Progress
from ibpred.reconstruct.modular import Residues, add, invert, multiply, subtract
from ibpred.reconstruct.notes import FORGETFUL, Notes
from ibpred.reconstruct.univariate import rational_functions
from ibpred.reduction.deck import TapeSampler
from ibpred.reduction.masters import CommonMasters, Masters, find_common_masters
from ibpred.reduction.recording import record_together
from ibpred.reduction.wanted import single
from ibpred.sectors.analysis import SectorAnalysis
from ibpred.sectors.order import dots, rank, sector_of, sort_key

_POOL = 24  # simple integrals of a sector that are considered
_SETS = 200  # sets of them that are compared
_NODES = 64  # samples along a line


def choose_masters(
    family: FamilyDefinition,
    analysis: SectorAnalysis,
    primes: Sequence[int],
    seed: int,
    preferred: Sequence[Powers] = (),
    progress: Progress = SILENT,
    notes: Notes = FORGETFUL,
) -> Masters:
    """Find the masters of one family and choose among them; see `choose_common_masters`.

    Parameters
    ----------
    family, analysis
        The family and its sectors.
    primes, seed
        Engine primes (two are used), and the seed of all random points.
    preferred
        Integrals that are to be masters.
    progress
        Told about each sector.
    notes
        Where finished parts are noted, so that an interrupted choice goes on.

    Raises
    ------
    InputError, UnfinishedError
        As `choose_common_masters`.
    """
    members = family_identities([family], [analysis])
    wish = [(0, tuple(powers)) for powers in preferred]
    found = choose_common_masters(members, [0], primes, seed, wish, progress, notes)
    return Masters(
        family.name,
        tuple(powers for _, powers in found.masters),
        found.prime,
        found.point,
        found.trials,
        tuple(powers for _, powers in found.by_order),
    )


def choose_common_masters(
    members: Sequence[FamilyIdentities],
    roots: Sequence[int],
    primes: Sequence[int],
    seed: int,
    preferred: Sequence[Integral] = (),
    progress: Progress = SILENT,
    notes: Notes = FORGETFUL,
) -> CommonMasters:
    """Find masters and exchange them, sector by sector, for ones whose denominators split.

    The masters that the total order gives are kept where no other choice is better, and in sectors
    for which the user prefers some.

    Parameters
    ----------
    members, roots
        As for `find_common_masters`.
    primes, seed
        Engine primes (two are used), and the seed of all random points.
    preferred
        Integrals that are to be masters.
    progress
        Told about each sector.
    notes
        Where finished parts are noted, so that an interrupted choice goes on.

    Raises
    ------
    InputError
        If all integrals vanish; if a preferred integral vanishes or reduces to other masters.
    UnfinishedError
        If the masters keep changing with the seeds.
    """
    found = notes.kept(
        "masters by the order",
        CommonMasters,
        lambda: find_common_masters(members, roots, primes[0], seed, preferred, progress),
    )
    if len(members[0].family.internal_ring.names) < 2:
        return found
    sectors: dict[tuple[int, int], list[Powers]] = {}
    for number, powers in found.masters:
        sectors.setdefault((number, sector_of(powers)), []).append(powers)
    settled = {(number, sector_of(powers)) for number, powers in preferred}
    coupled = {place: tuple(own) for place, own in sectors.items() if len(own) > 1 and place not in settled}
    if coupled:
        progress.stage("choice of masters")
    wish = list(preferred)
    templates = {number: derivative_templates(members[number].family) for number in {n for n, _ in coupled}}
    for done, ((number, sector), own) in enumerate(coupled.items()):
        search = partial(_best, members[number], templates[number], sector, own, primes, seed)
        better = notes.kept(f"choice in sector {sector} of family {number}", _Chosen, search).masters
        if better != own:
            wish += [(number, powers) for powers in better]
        progress.advance(done + 1, len(coupled))
    if len(wish) == len(preferred):
        return found
    chosen = find_common_masters(members, roots, primes[0], seed, wish, progress)
    return replace(chosen, by_order=found.masters)


@dataclass(frozen=True)
class _Chosen:
    masters: tuple[Powers, ...]


@dataclass(frozen=True)
class _Samples:
    """Reductions of the pool and of its derivatives to the sector's masters, along four lines.

    `integrals` has shape (pool, masters, samples), `derivatives` (pool, masters, samples) holds a random
    combination of the derivatives in the invariants.
    """

    prime: int
    nodes: Residues
    integrals: Residues
    derivatives: Residues


def _cut(analysis: SectorAnalysis, sector: int) -> SectorAnalysis:
    """The analysis with everything but one sector put to zero."""
    return replace(
        analysis,
        zero=frozenset(analysis.sectors) - {sector},
        maps=tuple(m for m in analysis.maps if m.source == sector and m.is_symmetry),
    )


def _pool(family: FamilyDefinition, sector: int, own: Sequence[Powers]) -> tuple[Powers, ...]:
    """Simple integrals of a sector, its masters among them: few dots or few numerators, not both."""
    lines = len(family.lines)
    seeds = [*seeds_of_sector(sector, lines, Depth(2, 0)), *seeds_of_sector(sector, lines, Depth(0, 2))]
    candidates = {tuple(int(a) for a in seed) for seed in seeds} - set(own)

    def effort(powers: Powers) -> tuple[int, tuple[int, ...]]:
        return dots(powers) + rank(powers), sort_key(powers)

    simple = sorted(candidates, key=effort)[: max(0, _POOL - len(own))]
    return (*own, *simple)


def _best(
    member: FamilyIdentities,
    templates: Mapping[str, Template],
    sector: int,
    own: tuple[Powers, ...],
    primes: Sequence[int],
    seed: int,
) -> _Chosen:
    pool = _pool(member.family, sector, own)
    cut = replace(member, analysis=_cut(member.analysis, sector))
    try:
        samples = _sample(cut, templates, own, pool, primes, seed)
    except UnfinishedError:
        # identities of higher sectors relate integrals of this one: its cut alone has more masters, and
        # says nothing about the choice
        return _Chosen(own)
    best, least = own, _score(samples, tuple(range(len(own))))
    for chosen in islice(_sets(pool, len(own)), _SETS):
        score = _score(samples, chosen)
        if score is not None and (least is None or score < least):
            best, least = tuple(pool[i] for i in chosen), score
    return _Chosen(best)


def _sets(pool: Sequence[Powers], size: int) -> Iterator[tuple[int, ...]]:
    """Index sets, those of simple integrals first."""
    weight = [dots(powers) + rank(powers) for powers in pool]

    def effort(chosen: tuple[int, ...]) -> tuple[int, tuple[int, ...]]:
        return sum(weight[i] for i in chosen), chosen

    return iter(sorted(combinations(range(len(pool)), size), key=effort))


def _sample(
    cut: FamilyIdentities,
    templates: Mapping[str, Template],
    own: tuple[Powers, ...],
    pool: tuple[Powers, ...],
    primes: Sequence[int],
    seed: int,
) -> _Samples:
    family = cut.family
    names = family.internal_ring.names[1:]
    quantities = [single(family, powers) for powers in pool]
    quantities += [template_at(templates[name], powers) for name in names for powers in pool]
    recorded = record_together([cut], [(0, powers) for powers in own], quantities, primes, seed)
    prime = primes[0]
    random = np.random.default_rng(seed)

    def draw(*shape: int) -> Residues:
        return random.integers(1, prime, size=shape, dtype=np.uint64)

    nodes = draw(_NODES)
    base, direction, other = draw(len(names), 1), draw(len(names), 1), draw(len(names), 1)
    ones = np.ones((1, _NODES), dtype=np.uint64)
    line = add(multiply(direction, nodes[None, :], prime), multiply(base, ones, prime), prime)
    # two lines in d at fixed invariants, two in the invariants at fixed d
    points = np.hstack(
        [np.vstack([nodes[None, :], multiply(x, ones, prime)]) for x in (base, other)]
        + [np.vstack([multiply(draw(1, 1), ones, prime), line]) for _ in range(2)]
    )
    values, _ = TapeSampler(recorded.tape)(points, prime)
    table = np.zeros((len(quantities), len(own), points.shape[1]), dtype=np.uint64)
    for (quantity, master), row in zip(recorded.entries, values, strict=True):
        table[quantity, master] = row
    size = len(pool)
    derivatives = np.zeros_like(table[:size])
    for v in range(len(names)):
        part = table[size * (v + 1) : size * (v + 2)]
        factor = draw(1)[0] * np.ones(part.shape, dtype=np.uint64)
        derivatives = add(derivatives, multiply(part, factor, prime), prime)
    return _Samples(prime, nodes, table[:size], derivatives)


Score = tuple[int, int, int]
"""Degree of denominators that mix d and invariants, degree in the invariants, degree in d."""


def _score(samples: _Samples, chosen: tuple[int, ...]) -> Score | None:
    """Judge a set of integrals; None where it is dependent or too complicated for the samples."""
    prime = samples.prime
    connection = _solve(samples.integrals[list(chosen)], samples.derivatives[list(chosen)], prime)
    if connection is None:
        return None
    weights = np.random.default_rng(len(chosen)).integers(
        1, prime, size=connection.shape[:2], dtype=np.uint64
    )
    mixed = np.zeros(connection.shape[2], dtype=np.uint64)
    for i, row in enumerate(weights):
        for j, weight in enumerate(row):
            mixed = add(mixed, multiply(connection[i, j], weight * np.ones_like(mixed), prime), prime)
    found = rational_functions(samples.nodes, mixed.reshape(4, -1), prime)
    if any(fraction is None for fraction in found):
        return None
    bottoms = [fraction[1] for fraction in found if fraction is not None]
    d_common = bottoms[0].gcd(bottoms[1]).degree()
    x_common = bottoms[2].gcd(bottoms[3]).degree()
    stray = bottoms[0].degree() - d_common + bottoms[2].degree() - x_common
    return int(stray), int(x_common), int(d_common)


def _solve(matrix: Residues, right: Residues, prime: int) -> Residues | None:
    """X with ``X matrix = right`` in every sample (last axis); None where the matrix is singular.

    Here the rows of `matrix` are the chosen integrals in the sector's masters and those of `right` their
    derivatives, so X is the connection of the chosen integrals.
    """
    n = len(matrix)
    # transpose: matrix^T X^T = right^T, eliminated by Gauss and Jordan
    work = np.concatenate([matrix.transpose(1, 0, 2), right.transpose(1, 0, 2)], axis=1)
    for column in range(n):
        pivot = next((r for r in range(column, n) if _nowhere_zero(work[r, column])), None)
        if pivot is None:
            return None
        work[[column, pivot]] = work[[pivot, column]]
        inverse = invert(work[column, column], prime)
        work[column] = multiply(work[column], np.broadcast_to(inverse, work[column].shape), prime)
        for row in range(n):
            if row != column:
                factor = np.broadcast_to(work[row, column].copy(), work[row].shape)
                work[row] = subtract(work[row], multiply(work[column], factor, prime), prime)
    return np.ascontiguousarray(work[:, n:].transpose(1, 0, 2))


def _nowhere_zero(values: NDArray[np.uint64]) -> bool:
    return bool(values.all())
