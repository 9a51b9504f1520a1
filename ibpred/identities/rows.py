"""From templates, seeds and symmetries to one sparse system of equations between integrals."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ibpred.family.definition import FamilyDefinition
from ibpred.identities.packing import Packing, packings
from ibpred.identities.pool import CoefficientPool
from ibpred.identities.quantities import Integral, Quantity
from ibpred.identities.seeding import Depth, SeedPlan, seeds_of_sector
from ibpred.identities.symmetry import Entries, symmetry_rows
from ibpred.identities.templates import Template, ibp_templates
from ibpred.sectors.analysis import SectorAnalysis
from ibpred.sectors.mapping import SectorMap
from ibpred.sectors.order import key_columns, order_columns

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
    parts: list[tuple[int, Entries]] = []
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
                parts.append((number, _identity_rows(template, stacked, code, pool)))
        for map_ in analysis.maps:
            if map_.is_symmetry and map_.source in chosen:
                entries = symmetry_rows(map_, chosen[map_.source], member.family, code, pool)
                parts.append((number, entries))
    definitions = _definitions(quantities, codes, pool, len(family.lines))
    met = [*(part.integral for _, part in parts), definitions.entries.integral]
    met += [codes[number].code(np.array([powers], dtype=np.int64)) for number, powers in preferred]
    parts += _mapped_rows(members, met, codes, pool)
    return _compress(parts, definitions, codes[0], pool, [m.analysis.zero for m in members], preferred)


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

    entries: Entries
    weights: NDArray[np.int32]
    part_row: IntArray
    part: IntArray
    part_coefficient: NDArray[np.int32]


def _definitions(
    quantities: Sequence[Quantity], codes: Sequence[Packing], pool: CoefficientPool, lines: int
) -> _Definitions:
    row, integral, ids, weights = [], [], [], []
    parts: list[tuple[int, int, int]] = []
    for q, quantity in enumerate(quantities):
        weights.append(pool.number({e: -c for e, c in quantity.weight.items()}))
        for (number, powers), (_, polynomial) in zip(quantity.integrals, quantity.terms, strict=True):
            row.append(q)
            integral.append(int(codes[number].code(np.array(powers, dtype=np.int64))))
            ids.append(pool.number(polynomial))
        parts += [(q, part, pool.number(polynomial)) for part, polynomial in quantity.parts]
    entries = Entries(
        np.array(row, dtype=np.int64),
        np.array(integral, dtype=np.int64),
        np.array(ids, dtype=np.int32),
        np.zeros((len(quantities), lines), dtype=np.int64),
    )
    table = np.array(parts, dtype=np.int64).reshape(-1, 3)
    return _Definitions(
        entries, np.array(weights, dtype=np.int32), table[:, 0], table[:, 1], table[:, 2].astype(np.int32)
    )


def _mapped_rows(
    members: Sequence[FamilyIdentities],
    met: Sequence[IntArray],
    codes: Sequence[Packing],
    pool: CoefficientPool,
) -> list[tuple[int, Entries]]:
    """Take every integral of a mapped sector to the sector's representative, top sectors first.

    Images lie in the target and its subsectors, which all come before the source in the order, so
    one descending pass meets every integral.
    """
    number_of = {member.family.name: number for number, member in enumerate(members)}
    maps = [(i, m) for i, member in enumerate(members) for m in member.analysis.maps if not m.is_symmetry]
    waiting: dict[tuple[int, int], list[IntArray]] = {(i, m.source): [] for i, m in maps}

    def meet(integrals: IntArray) -> None:
        distinct = np.unique(integrals)
        owners = distinct // codes[0].total
        sectors = key_columns(codes[0].vectors(distinct))[1]
        for place in np.unique(np.column_stack([owners, sectors]), axis=0).tolist():
            if (place[0], place[1]) in waiting:
                chosen = (owners == place[0]) & (sectors == place[1])
                waiting[place[0], place[1]].append(distinct[chosen])

    for integrals in met:
        meet(integrals)

    def place_of(entry: tuple[int, SectorMap]) -> tuple[int, int, int]:
        number, map_ = entry
        return (map_.source.bit_count(), number, map_.source)

    found = []
    for number, map_ in sorted(maps, key=place_of, reverse=True):
        if waiting[number, map_.source]:
            vectors = codes[0].vectors(np.unique(np.concatenate(waiting[number, map_.source])))
            goal = codes[number_of[map_.target_family]]
            entries = symmetry_rows(map_, vectors, members[number].family, codes[number], pool, goal)
            meet(entries.integral)
            found.append((number, entries))
    return found


def _ranking(vectors: IntArray, owners: IntArray, preferred: Sequence[Integral]) -> IntArray:
    """The total order, with preferred integrals moved to the start of their sector."""
    order = order_columns(vectors, owners)
    if not preferred:
        return order
    wish = {(number, *powers): i for i, (number, powers) in enumerate(preferred)}
    ranked = np.column_stack([owners, vectors])[order]
    lines, sectors, _, _ = key_columns(ranked[:, 1:])
    last = len(wish)
    wished = np.array([wish.get(tuple(row), last) for row in ranked.tolist()], dtype=np.int64)
    return order[np.lexsort((wished, sectors, ranked[:, 0], lines))]


def _compress(
    parts: Sequence[tuple[int, Entries]],
    definitions: _Definitions,
    code: Packing,
    pool: CoefficientPool,
    zero: Sequence[frozenset[int]],
    preferred: Sequence[Integral],
) -> IntegralRows:
    offsets = np.cumsum([0, *(len(part.owners) for _, part in parts)])
    seeds, quantities = int(offsets[-1]), len(definitions.weights)
    last = definitions.entries
    row = np.concatenate([*(p.row + o for (_, p), o in zip(parts, offsets, strict=False)), last.row + seeds])
    integral = np.concatenate([*(p.integral for _, p in parts), last.integral])
    coefficient = np.concatenate([*(p.coefficient for _, p in parts), last.coefficient])
    # columns: the integrals without zero sectors, ranked, then the quantities
    codes, place = np.unique(integral, return_inverse=True)
    vectors, owners = code.vectors(codes), codes // code.total
    sectors = key_columns(vectors)[1]
    vanishing = np.zeros(len(codes), dtype=bool)
    for number, empty in enumerate(zero):
        vanishing |= (owners == number) & np.isin(sectors, np.array(sorted(empty), dtype=np.int64))
    alive = np.flatnonzero(~vanishing)
    order = _ranking(vectors[alive], owners[alive], preferred)
    column_of = np.full(len(codes), -1, dtype=np.int64)
    column_of[alive[order]] = np.arange(len(order))
    column = column_of[place]
    kept = column >= 0
    # rows: in the order of their seeds, definitions last
    rank = np.arange(seeds + quantities)
    sector_of_row = np.zeros((seeds, 2), dtype=np.int64)
    if parts:
        families = np.concatenate([np.full(len(part.owners), number) for number, part in parts])
        stacked = np.vstack([part.owners for _, part in parts])
        by_seed = order_columns(stacked, families)
        rank[by_seed] = np.arange(seeds)
        sector_of_row = np.column_stack([families, key_columns(stacked)[1]])[by_seed]
    own = np.arange(quantities)
    row = np.concatenate([rank[row[kept]], own + seeds, definitions.part_row + seeds])
    column = np.concatenate([column[kept], own + len(order), definitions.part + len(order)])
    coefficient = np.concatenate([coefficient[kept], definitions.weights, definitions.part_coefficient])
    sorting = np.argsort(row * (len(order) + quantities + 1) - column, kind="stable")
    row = row[sorting]
    begins = np.flatnonzero(np.concatenate([[True], row[1:] != row[:-1]])) if len(row) else row
    written = sector_of_row[row[begins][row[begins] < seeds]]
    ends = np.flatnonzero((written[1:] != written[:-1]).any(axis=1)) + 1
    exponents, values = pool.arrays()
    return IntegralRows(
        vectors[alive[order]],
        owners[alive[order]],
        quantities,
        np.append(begins, len(row)).astype(np.int64),
        column[sorting].astype(np.int32),
        coefficient[sorting].astype(np.int32),
        np.append(ends, len(written)).astype(np.int64),
        pool.variables,
        exponents,
        values,
    )
