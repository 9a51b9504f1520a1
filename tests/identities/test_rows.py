"""Rows: seeds counted by formula, symmetry rows checked at random values of the lines, order of columns."""

from __future__ import annotations

import random
from math import comb

import numpy as np
import pytest
from family_maker import double_box, kite, massless_box
from hypothesis import given
from hypothesis import strategies as st

from ibpred.errors import UnfinishedError
from ibpred.identities.packing import packing
from ibpred.identities.pool import CoefficientPool, distinct_rows
from ibpred.identities.quantities import template_at
from ibpred.identities.rows import FamilyIdentities, family_identities, seeded_sectors, write_rows
from ibpred.identities.seeding import Depth, seeds_of_sector, subsectors
from ibpred.identities.symmetry import symmetry_rows
from ibpred.identities.templates import ibp_templates
from ibpred.sectors.analysis import analyse
from ibpred.sectors.order import dots, lines_of, rank, sector_of, sort_key

P = 2**61 - 1


@given(st.integers(0, 2**5 - 1), st.integers(0, 3), st.integers(0, 3))
def test_seeds_are_all_powers_within_the_depth(sector: int, most_dots: int, most_rank: int) -> None:
    seeds = seeds_of_sector(sector, 5, Depth(most_dots, most_rank)).tolist()
    inside = sector.bit_count()
    assert len(seeds) == comb(inside + most_dots, inside) * comb(5 - inside + most_rank, 5 - inside)
    assert len({tuple(s) for s in seeds}) == len(seeds)
    for seed in seeds:
        assert sector_of(seed) == sector
        assert dots(seed) <= most_dots
        assert rank(seed) <= most_rank


def test_subsectors() -> None:
    assert subsectors([0b101]) == {0, 1, 4, 5}
    assert subsectors([0b11, 0b110]) == {0, 1, 2, 3, 4, 6}


@given(st.data())
def test_packing_is_one_to_one_and_additive(data: st.DataObject) -> None:
    size = data.draw(st.integers(1, 8))
    low = data.draw(st.lists(st.integers(-5, 0), min_size=size, max_size=size))
    high = data.draw(st.lists(st.integers(1, 5), min_size=size, max_size=size))
    code = packing(low, high)
    rows = data.draw(
        st.lists(st.tuples(*(st.integers(a, b) for a, b in zip(low, high, strict=True))), min_size=1)
    )
    vectors = np.array(rows, dtype=np.int64)
    assert np.array_equal(code.vectors(code.code(vectors)), vectors)
    moved = code.code(vectors[:1]) + code.shift(vectors - vectors[:1])
    assert np.array_equal(moved, code.code(vectors))


def test_packing_says_when_it_does_not_fit() -> None:
    with pytest.raises(UnfinishedError, match="64-bit"):
        packing([-9] * 20, [9] * 20)


@given(st.lists(st.lists(st.integers(-3, 3), min_size=3, max_size=3), min_size=1, max_size=30))
def test_distinct_rows(rows: list[list[int]]) -> None:
    values = np.array(rows, dtype=np.int64)
    distinct, place = distinct_rows(values)
    assert np.array_equal(distinct[place], values)
    assert len(distinct) == len({tuple(r) for r in rows})


def value_of(pool: CoefficientPool, number: int, point: list[int]) -> int:
    exponents, values = pool.arrays()
    total = 0
    for e, c in zip(exponents.tolist(), values[number].tolist(), strict=True):
        term = c
        for x, n in zip(point, e, strict=True):
            term = term * pow(x, n, P) % P
        total += term
    return total % P


def product_of(lines: list[int], powers: list[int]) -> int:
    total = 1
    for d, a in zip(lines, powers, strict=True):
        total = total * pow(d, -a, P) % P
    return total


@pytest.mark.parametrize("make", [massless_box, kite, double_box])
def test_symmetry_rows_hold_for_any_values_of_the_lines(make) -> None:
    """With D_m random and the source's lines given their images, each row vanishes identically."""
    family = make()
    analysis = analyse(family)
    rng = random.Random(3)
    n = len(family.lines)
    code = packing([-8] * n, [8] * n)
    point = [rng.randrange(P) for _ in family.internal_ring.names]
    kinematic = [1 if i.name == family.unit else point[1] for i in family.invariants]
    checked = 0
    for map_ in analysis.maps:
        if map_.kind != "momentum":
            continue
        values = [rng.randrange(1, P) for _ in range(n)]
        images = []
        for constant, entries in map_.images:
            total = constant.modular(kinematic, P)
            for line, coefficient in entries:
                total += coefficient.modular(kinematic, P) * values[line]
            images.append(total % P)
        chosen = seeds_of_sector(map_.source, n, Depth(1, 2))
        picked = chosen[rng.sample(range(len(chosen)), min(6, len(chosen)))]
        pool = CoefficientPool(family.internal_ring.names)
        entries = symmetry_rows(map_, picked, family, code, pool)
        vectors = code.vectors(entries.integral)
        for r, powers in enumerate(picked.tolist()):
            # a row is (image of the integral) - (integral): add the integral, compare with the product
            total = product_of(values, powers)
            for e in np.flatnonzero(entries.row == r).tolist():
                coefficient = value_of(pool, int(entries.coefficient[e]), point)
                total += coefficient * product_of(values, vectors[e].tolist())
            assert total % P == product_of(images, powers)
            checked += 1
    assert checked


@pytest.mark.parametrize("make", [massless_box, kite])
def test_rows_are_well_formed(make) -> None:
    family = make()
    analysis = analyse(family)
    templates = ibp_templates(family)
    plan = dict.fromkeys(seeded_sectors(analysis), Depth(1, 2))
    top = tuple(0 if line.numerator else 1 for line in family.lines)
    quantity = template_at(templates[0], top)
    with pytest.raises(KeyError):
        quantity.weight[(0,) * len(family.internal_ring.names)]
    rows = write_rows([FamilyIdentities(family, analysis, templates)], [plan])
    ranked = [tuple(r) for r in rows.powers.tolist()]
    assert ranked == sorted(ranked, key=sort_key)
    assert not any(sector_of(r) in analysis.zero for r in ranked)
    assert rows.places([(0, ranked[3]), (0, (9,) * len(family.lines))]) == (3, -1)
    for r in range(len(rows.start) - 1):
        columns = rows.column[rows.start[r] : rows.start[r + 1]]
        assert len(columns)
        assert np.all(np.diff(columns) < 0)
    assert rows.coefficient.min() > 0
    ends = rows.sector_ends.tolist()
    assert ends[-1] == len(rows.start) - 1
    assert ends == sorted(set(ends))
    assert len(ends) >= len(seeded_sectors(analysis))


def test_preferred_integrals_come_first_in_their_sector() -> None:
    family = massless_box()
    analysis = analyse(family)
    plan = dict.fromkeys(seeded_sectors(analysis), Depth(1, 2))
    wish = [(1, 0, 2, 0), (2, 1, 1, 1)]
    members = family_identities([family], [analysis])
    rows = write_rows(members, [plan], preferred=[(0, powers) for powers in wish])
    for powers in wish:
        own = [tuple(r) for r in rows.powers.tolist() if sector_of(r) == sector_of(powers)]
        assert own[0] == powers


def test_sectors_that_are_mapped_need_no_seeds() -> None:
    family = double_box()
    analysis = analyse(family)
    seeded = seeded_sectors(analysis)
    assert set(analysis.representatives) <= set(seeded)
    assert all(lines_of(s) for s in seeded)
    assert len(seeded) < len(analysis.nonzero)
