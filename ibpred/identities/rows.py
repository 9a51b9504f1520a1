"""From templates, seeds and symmetries to one sparse system of equations between integrals."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ibpred.family.definition import FamilyDefinition
from ibpred.identities.collection import IntegralCollection, Part
from ibpred.identities.packing import Packing, packings
from ibpred.identities.pool import CoefficientPool
from ibpred.identities.quantities import Integral, Quantity
from ibpred.identities.seeding import Depth, SeedPlan, seeds_of_sector
from ibpred.identities.symmetry import Entries, symmetry_rows
from ibpred.identities.templates import Template, ibp_templates
from ibpred.kernels.gathering import count_entries, scatter_entries, sort_rows
from ibpred.sectors.analysis import SectorAnalysis
from ibpred.sectors.mapping import SectorMap
from ibpred.sectors.order import order_columns

IntArray = NDArray[np.int64]


@dataclass(frozen=True)
class IntegralRows:
    """Equations between integrals in compressed rows; columns are integrals in the total order.

    Attributes
    ----------
    powers
        int64, (integrals, lines): the integral of each column, simplest first. Integrals of zero
        sectors do not occur.
    owners
        int64, (integrals,): the number of the family of each.
    quantities
        Number of further columns, after the integrals: the quantities in the order given.
    start, column, coefficient
        Row r holds the entries ``start[r]:start[r+1]``, columns descending. Rows follow the order of
        their seeds; definitions of quantities come last.
    sector_ends
        int64: numbers of rows at which the seeds of a sector end, ascending.
    variables, exponents, values
        The table of coefficients: polynomials in `variables`, (monomials, variables) and
        (coefficients, monomials).
    """

    powers: IntArray
    owners: IntArray
    quantities: int
    start: IntArray
    column: NDArray[np.int32]
    coefficient: NDArray[np.int32]
    sector_ends: IntArray
    variables: tuple[str, ...]
    exponents: IntArray
    values: IntArray

    @property
    def columns(self) -> int:
        return len(self.powers) + self.quantities

    def integral(self, column: int) -> Integral:
        """The integral of a column."""
        return int(self.owners[column]), tuple(self.powers[column].tolist())

    def places(self, wanted: Iterable[Integral]) -> tuple[int, ...]:
        """Columns of integrals, -1 for those that occur in no equation."""
        index = {self.integral(i): i for i in range(len(self.powers))}
        return tuple(index.get((number, tuple(powers)), -1) for number, powers in wanted)


@dataclass(frozen=True)
class FamilyIdentities:
    """One of the families whose equations are written down together.

    Attributes
    ----------
    family, analysis
        The family and its sectors; maps may lead to families that come before.
    templates
        Its identities.
    """

    family: FamilyDefinition
    analysis: SectorAnalysis
    templates: tuple[Template, ...]


def family_identities(
    families: Sequence[FamilyDefinition], analyses: Sequence[SectorAnalysis]
) -> tuple[FamilyIdentities, ...]:
    """Families with their integration-by-parts identities."""
    return tuple(
        FamilyIdentities(family, analysis, ibp_templates(family))
        for family, analysis in zip(families, analyses, strict=True)
    )


def seeded_sectors(analysis: SectorAnalysis) -> tuple[int, ...]:
    """The sectors whose identities are written down: all that no map of momenta takes elsewhere."""
    mapped = {m.source for m in analysis.maps if m.kind == "momentum" and not m.is_symmetry}
    return tuple(sector for sector in analysis.nonzero if sector not in mapped)


def write_rows(
    members: Sequence[FamilyIdentities],
    plans: Sequence[SeedPlan],
    quantities: Sequence[Quantity] = (),
    preferred: Sequence[Integral] = (),
) -> IntegralRows:
    """Instantiate identities and symmetries.

    Parameters
    ----------
    members
        The families, with the same kinematics and numbers of lines.
    plans
        For each family the depth of the seeds for each sector; sectors that are not named get none.
        Sectors that a map takes elsewhere need no seeds: all their integrals are mapped.
    quantities
        Combinations to be defined as further unknowns.
    preferred
        Integrals ranked as the simplest of their sector, the first one simplest.
    """
    codes = _packings(members, plans, quantities, preferred)
    family = members[0].family
    pool = CoefficientPool(family.internal_ring.names)
    integrals = IntegralCollection(codes)
    parts: list[Part] = []
    for number, (member, plan, code) in enumerate(zip(members, plans, codes, strict=True)):
        analysis, count = member.analysis, len(member.family.lines)
        chosen = {
            sector: seeds_of_sector(sector, count, depth)
            for sector, depth in sorted(plan.items())
            if sector not in analysis.zero
        }
        if chosen:
            stacked = np.vstack(list(chosen.values()))
            for template in member.templates:
                parts.append(integrals.part(_identity_rows(template, stacked, code, pool), number))
        for map_ in analysis.maps:
            if map_.is_symmetry and map_.source in chosen:
                entries = symmetry_rows(map_, chosen[map_.source], member.family, code, pool)
                parts.append(integrals.part(entries, number))
    definitions = _definitions(quantities, integrals, pool)
    wish = [_number(integrals, integral) for integral in preferred]
    parts += _mapped_rows(members, integrals, pool)
    return _compress(parts, definitions, integrals, pool, [m.analysis.zero for m in members], wish)


def _number(integrals: IntegralCollection, integral: Integral) -> int:
    family, powers = integral
    return int(integrals.numbers(integrals.codes[family].code(np.array([powers], dtype=np.int64)))[0])


def _packings(
    members: Sequence[FamilyIdentities],
    plans: Sequence[SeedPlan],
    quantities: Sequence[Quantity],
    preferred: Sequence[Integral],
) -> tuple[Packing, ...]:
    depth = Depth(0, 0)
    for plan in plans:
        for other in plan.values():
            depth = depth.cover(other)
    named = [powers for q in quantities for powers, _ in q.terms] + [powers for _, powers in preferred]
    # one step beyond the seeds, and numerators that a symmetry spreads over other lines
    reach = depth.rank + 1
    for powers in named:
        reach = max(reach, -sum(a for a in powers if a < 0))
    dots = depth.dots + 2
    for powers in named:
        dots = max(dots, 1 + sum(a - 1 for a in powers if a > 0))
    count = len(members[0].family.lines)
    numerator = [all(m.family.lines[i].numerator for m in members) for i in range(count)]
    return packings([-reach] * count, [0 if n else dots for n in numerator], len(members))


def _identity_rows(template: Template, seeds: IntArray, code: Packing, pool: CoefficientPool) -> Entries:
    ids = pool.of_template(template, seeds)
    term, row = np.nonzero(ids)
    integral = code.code(seeds)[row] + code.shift(template.shifts)[term]
    return Entries(row, integral, ids[term, row], seeds)


@dataclass(frozen=True)
class _Definitions:
    """Right-hand sides of the quantities, and minus their weights.

    `part_row`, `part` and `part_coefficient` are the entries with earlier quantities.
    """

    row: NDArray[np.int32]
    integral: NDArray[np.int32]
    coefficient: NDArray[np.int32]
    weights: NDArray[np.int32]
    part_row: NDArray[np.int32]
    part: NDArray[np.int32]
    part_coefficient: NDArray[np.int32]


def _definitions(
    quantities: Sequence[Quantity], integrals: IntegralCollection, pool: CoefficientPool
) -> _Definitions:
    terms: list[tuple[int, int]] = []
    codes: list[int] = []
    weights: list[int] = []
    parts: list[tuple[int, int, int]] = []
    for q, quantity in enumerate(quantities):
        weights.append(pool.number({e: -c for e, c in quantity.weight.items()}))
        for (number, powers), (_, polynomial) in zip(quantity.integrals, quantity.terms, strict=True):
            codes.append(int(integrals.codes[number].code(np.array(powers, dtype=np.int64))))
            terms.append((q, pool.number(polynomial)))
        parts += [(q, part, pool.number(polynomial)) for part, polynomial in quantity.parts]
    entries = np.array(terms, dtype=np.int32).reshape(-1, 2)
    table = np.array(parts, dtype=np.int32).reshape(-1, 3)
    return _Definitions(
        entries[:, 0].copy(),
        integrals.numbers(np.array(codes, dtype=np.int64)),
        entries[:, 1].copy(),
        np.array(weights, dtype=np.int32),
        *(table[:, k].copy() for k in range(3)),
    )


def _mapped_rows(
    members: Sequence[FamilyIdentities], integrals: IntegralCollection, pool: CoefficientPool
) -> list[Part]:
    """Take every integral of a mapped sector to the sector's representative, top sectors first.

    Images lie in the target and its subsectors, which all come before the source in the order, so
    one descending pass meets every integral.
    """
    number_of = {member.family.name: number for number, member in enumerate(members)}
    maps = [(i, m) for i, member in enumerate(members) for m in member.analysis.maps if not m.is_symmetry]

    def place_of(entry: tuple[int, SectorMap]) -> tuple[int, int, int]:
        number, map_ = entry
        return (map_.source.bit_count(), number, map_.source)

    found = []
    for number, map_ in sorted(maps, key=place_of, reverse=True):
        vectors = integrals.of_sector(number, map_.source)
        if len(vectors):
            source, goal = integrals.codes[number], integrals.codes[number_of[map_.target_family]]
            entries = symmetry_rows(map_, vectors, members[number].family, source, pool, goal)
            found.append(integrals.part(entries, number))
    return found


def _ranking(order: IntArray, places: IntArray, preferred: Sequence[int]) -> IntArray:
    """Integrals in the total order with the preferred ones moved to the start of their sector."""
    if not preferred:
        return order
    wished = np.full(len(places), len(preferred), dtype=np.int64)
    wished[preferred] = np.arange(len(preferred))
    # places come in runs along the order
    moved = (places[order][1:] != places[order][:-1]).any(axis=1)
    run = np.concatenate([[0], np.cumsum(moved)])
    return order[np.lexsort((wished[order], run))]


def _compress(
    parts: Sequence[Part],
    definitions: _Definitions,
    integrals: IntegralCollection,
    pool: CoefficientPool,
    zero: Sequence[frozenset[int]],
    preferred: Sequence[int],
) -> IntegralRows:
    last, quantities = definitions, len(definitions.weights)
    vectors, places = integrals.vectors(), integrals.places()
    order = order_columns(vectors, places[:, 0])
    # rows: in the order of the integrals they belong to, definitions last
    position = np.empty(len(order), dtype=np.int64)
    position[order] = np.arange(len(order))
    owners = np.concatenate([part.owner for part in parts]) if parts else np.zeros(0, dtype=np.int32)
    seeds = len(owners)
    by_owner = np.argsort(position[owners], kind="stable")
    rank = np.empty(seeds, dtype=np.int64)
    rank[by_owner] = np.arange(seeds)
    offsets = np.cumsum([0, *(len(part.owner) for part in parts)])
    pieces = [
        (part.row, part.integral, part.coefficient, rank[begin:end])
        for part, begin, end in zip(parts, offsets[:-1], offsets[1:], strict=True)
    ]
    own = np.arange(quantities)
    pieces.append((last.row, last.integral, last.coefficient, own + seeds))
    # columns: the integrals outside zero sectors that occur, ranked, then the quantities
    alive = np.zeros(len(vectors), dtype=np.int32)
    for number, empty in enumerate(zero):
        zeros = np.array(sorted(empty), dtype=np.int64)
        alive[(places[:, 0] == number) & np.isin(places[:, 1], zeros)] = -1
    counts = np.zeros(seeds + quantities, dtype=np.int64)
    occurs = np.zeros(len(vectors), dtype=np.bool_)
    for row, number_, _, place in pieces:
        count_entries(row, number_, alive, place, counts, occurs)
    ranked = _ranking(order, places, preferred)
    ranked = ranked[occurs[ranked]]
    column = np.full(len(vectors), -1, dtype=np.int32)
    column[ranked] = np.arange(len(ranked))
    # a quantity's own column, and those of its parts
    counts[seeds:] += 1 + np.bincount(last.part_row, minlength=quantities)
    start = np.concatenate([[0], np.cumsum(counts)])
    following = start[:-1].copy()
    columns = np.empty(start[-1], dtype=np.int32)
    coefficients = np.empty(start[-1], dtype=np.int32)
    for row, number_, coefficient, place in pieces:
        scatter_entries(row, number_, coefficient, column, place, following, columns, coefficients)
    of_quantities = np.arange(len(ranked), len(ranked) + quantities, dtype=np.int32)
    for row, number_, coefficient in (
        (own.astype(np.int32), own.astype(np.int32), last.weights),
        (last.part_row, last.part, last.part_coefficient),
    ):
        scatter_entries(
            row, number_, coefficient, of_quantities, own + seeds, following, columns, coefficients
        )
    sort_rows(start, columns, coefficients)
    filled = counts > 0
    written = places[owners[by_owner]][filled[:seeds]]
    ends = np.flatnonzero((written[1:] != written[:-1]).any(axis=1)) + 1
    exponents, values = pool.arrays()
    return IntegralRows(
        vectors[ranked],
        places[ranked, 0],
        quantities,
        np.concatenate([[0], start[1:][filled]]),
        columns,
        coefficients,
        np.append(ends, len(written)).astype(np.int64),
        pool.variables,
        exponents,
        values,
    )
