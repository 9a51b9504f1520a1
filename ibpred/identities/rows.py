"""From templates, seeds and symmetries to one sparse system of equations between integrals."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.identities.packing import Packing, packing
from ibpred.identities.pool import CoefficientPool
from ibpred.identities.quantities import Quantity
from ibpred.identities.seeding import Depth, SeedPlan, seeds_of_sector
from ibpred.identities.symmetry import Entries, symmetry_rows
from ibpred.identities.templates import Template
from ibpred.sectors.analysis import SectorAnalysis
from ibpred.sectors.mapping import SectorMap
from ibpred.sectors.order import key_columns, order_columns, sector_key

IntArray = NDArray[np.int64]


@dataclass(frozen=True)
class IntegralRows:
    """Equations between integrals in compressed rows; columns are integrals in the total order.

    Attributes
    ----------
    powers
        int64, (integrals, lines): the integral of each column, simplest first. Integrals of zero
        sectors do not occur.
    quantities
        Number of further columns, after the integrals: the quantities in the order given.
    start, column, coefficient
        Row r holds the entries ``start[r]:start[r+1]``, columns descending. Rows follow the order of
        their seeds; definitions of quantities come last.
    variables, exponents, values
        The table of coefficients: polynomials in `variables`, (monomials, variables) and
        (coefficients, monomials).
    """

    powers: IntArray
    quantities: int
    start: IntArray
    column: NDArray[np.int32]
    coefficient: NDArray[np.int32]
    variables: tuple[str, ...]
    exponents: IntArray
    values: IntArray

    @property
    def columns(self) -> int:
        return len(self.powers) + self.quantities

    def places(self, wanted: Iterable[Powers]) -> tuple[int, ...]:
        """Columns of integrals, -1 for those that occur in no equation."""
        index = {tuple(row): i for i, row in enumerate(self.powers.tolist())}
        return tuple(index.get(tuple(powers), -1) for powers in wanted)


def seeded_sectors(analysis: SectorAnalysis) -> tuple[int, ...]:
    """The sectors whose identities are written down: all that no map of momenta takes elsewhere."""
    mapped = {m.source for m in analysis.maps if m.kind == "momentum" and m.source != m.target}
    return tuple(sector for sector in analysis.nonzero if sector not in mapped)


def write_rows(
    family: FamilyDefinition,
    analysis: SectorAnalysis,
    templates: Sequence[Template],
    plan: SeedPlan,
    quantities: Sequence[Quantity] = (),
    preferred: Sequence[Powers] = (),
) -> IntegralRows:
    """Instantiate identities and symmetries.

    Parameters
    ----------
    family, analysis, templates
        The family, its sectors, its identities.
    plan
        Depth of the seeds for each sector; sectors that are not named get none. Sectors that a map
        takes elsewhere need no seeds: all their integrals are mapped.
    quantities
        Combinations to be defined as further unknowns.
    preferred
        Integrals ranked as the simplest of their sector, the first one simplest.
    """
    code = _packing(family, plan, quantities, preferred)
    pool = CoefficientPool(family.internal_ring.names)
    parts = []
    seeds = [
        seeds_of_sector(sector, len(family.lines), depth)
        for sector, depth in sorted(plan.items())
        if sector not in analysis.zero
    ]
    if seeds:
        stacked = np.vstack(seeds)
        for template in templates:
            parts.append(_identity_rows(template, stacked, code, pool))
    definitions = _definitions(quantities, code, pool, family)
    own = [m for m in analysis.maps if m.source == m.target]
    for map_ in own:
        if map_.source in plan:
            chosen = seeds_of_sector(map_.source, len(family.lines), plan[map_.source])
            parts.append(symmetry_rows(map_, chosen, family, code, pool))
    met = [part.integral for part in (*parts, definitions.entries)]
    if preferred:
        met.append(code.code(np.array(preferred, dtype=np.int64)))
    parts += _mapped_rows(analysis, family, met, code, pool)
    zero = np.array(sorted(analysis.zero), dtype=np.int64)
    return _compress(parts, definitions, code, pool, zero, preferred)


def _packing(
    family: FamilyDefinition,
    plan: SeedPlan,
    quantities: Sequence[Quantity],
    preferred: Sequence[Powers],
) -> Packing:
    depth = Depth(0, 0)
    for other in plan.values():
        depth = depth.cover(other)
    named = [powers for q in quantities for powers, _ in q.terms] + list(preferred)
    # one step beyond the seeds, and numerators that a symmetry spreads over other lines
    reach = depth.rank + 1
    for powers in named:
        reach = max(reach, -sum(a for a in powers if a < 0))
    dots = depth.dots + 2
    for powers in named:
        dots = max(dots, 1 + sum(a - 1 for a in powers if a > 0))
    return packing(
        [-reach] * len(family.lines),
        [0 if line.numerator else dots for line in family.lines],
    )


def _identity_rows(template: Template, seeds: IntArray, code: Packing, pool: CoefficientPool) -> Entries:
    ids = pool.of_template(template, seeds)
    term, row = np.nonzero(ids)
    integral = code.code(seeds)[row] + code.shift(template.shifts)[term]
    return Entries(row, integral, ids[term, row], seeds)


@dataclass(frozen=True)
class _Definitions:
    """Right-hand sides of the quantities, and minus their weights."""

    entries: Entries
    weights: NDArray[np.int32]


def _definitions(
    quantities: Sequence[Quantity], code: Packing, pool: CoefficientPool, family: FamilyDefinition
) -> _Definitions:
    row, powers, ids, weights = [], [], [], []
    for q, quantity in enumerate(quantities):
        weights.append(pool.number({e: -c for e, c in quantity.weight.items()}))
        for integral, polynomial in quantity.terms:
            row.append(q)
            powers.append(integral)
            ids.append(pool.number(polynomial))
    n = len(family.lines)
    vectors = np.array(powers, dtype=np.int64).reshape(len(powers), n)
    entries = Entries(
        np.array(row, dtype=np.int64),
        code.code(vectors),
        np.array(ids, dtype=np.int32),
        np.zeros((len(quantities), n), dtype=np.int64),
    )
    return _Definitions(entries, np.array(weights, dtype=np.int32))


def _mapped_rows(
    analysis: SectorAnalysis,
    family: FamilyDefinition,
    met: Sequence[IntArray],
    code: Packing,
    pool: CoefficientPool,
) -> list[Entries]:
    """Take every integral of a mapped sector to the sector's representative, top sectors first.

    Images lie in the target and its subsectors, which all come before the source in the order, so
    one descending pass meets every integral.
    """
    maps = [m for m in analysis.maps if m.source != m.target]
    waiting: dict[int, list[IntArray]] = {m.source: [] for m in maps}

    def meet(codes: IntArray) -> None:
        distinct = np.unique(codes)
        sectors = key_columns(code.vectors(distinct))[1]
        for sector in np.unique(sectors).tolist():
            if sector in waiting:
                waiting[sector].append(distinct[sectors == sector])

    for codes in met:
        meet(codes)

    def place(map_: SectorMap) -> tuple[int, int]:
        return sector_key(map_.source)

    found = []
    for map_ in sorted(maps, key=place, reverse=True):
        if waiting[map_.source]:
            vectors = code.vectors(np.unique(np.concatenate(waiting[map_.source])))
            entries = symmetry_rows(map_, vectors, family, code, pool)
            meet(entries.integral)
            found.append(entries)
    return found


def _ranking(vectors: IntArray, preferred: Sequence[Powers]) -> IntArray:
    """The total order, with preferred integrals moved to the start of their sector."""
    order = order_columns(vectors)
    if not preferred:
        return order
    wish = {tuple(powers): i for i, powers in enumerate(preferred)}
    ranked = vectors[order]
    lines, sectors, _, _ = key_columns(ranked)
    last = len(wish)
    wished = np.array([wish.get(tuple(row), last) for row in ranked.tolist()], dtype=np.int64)
    return order[np.lexsort((wished, sectors, lines))]


def _compress(
    parts: Sequence[Entries],
    definitions: _Definitions,
    code: Packing,
    pool: CoefficientPool,
    zero: IntArray,
    preferred: Sequence[Powers],
) -> IntegralRows:
    offsets = np.cumsum([0, *(len(part.owners) for part in parts)])
    seeds, quantities = int(offsets[-1]), len(definitions.weights)
    last = definitions.entries
    row = np.concatenate([*(p.row + o for p, o in zip(parts, offsets, strict=False)), last.row + seeds])
    integral = np.concatenate([*(p.integral for p in parts), last.integral])
    coefficient = np.concatenate([*(p.coefficient for p in parts), last.coefficient])
    # columns: the integrals without zero sectors, ranked, then the quantities
    codes, place = np.unique(integral, return_inverse=True)
    vectors = code.vectors(codes)
    alive = np.flatnonzero(~np.isin(key_columns(vectors)[1], zero))
    order = _ranking(vectors[alive], preferred)
    column_of = np.full(len(codes), -1, dtype=np.int64)
    column_of[alive[order]] = np.arange(len(order))
    column = column_of[place]
    kept = column >= 0
    # rows: in the order of their seeds, definitions last
    rank = np.arange(seeds + quantities)
    if parts:
        rank[order_columns(np.vstack([part.owners for part in parts]))] = np.arange(seeds)
    own = np.arange(quantities)
    row = np.concatenate([rank[row[kept]], own + seeds])
    column = np.concatenate([column[kept], own + len(order)])
    coefficient = np.concatenate([coefficient[kept], definitions.weights])
    sorting = np.argsort(row * (len(order) + quantities + 1) - column, kind="stable")
    row = row[sorting]
    begins = np.flatnonzero(np.concatenate([[True], row[1:] != row[:-1]])) if len(row) else row
    exponents, values = pool.arrays()
    return IntegralRows(
        vectors[alive[order]],
        quantities,
        np.append(begins, len(row)).astype(np.int64),
        column[sorting].astype(np.int32),
        coefficient[sorting].astype(np.int32),
        pool.variables,
        exponents,
        values,
    )
