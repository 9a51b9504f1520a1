from fractions import Fraction

import pytest
import sector_families as families

from ibpred.family.polynomials import symanzik
from ibpred.sectors.order import lines_of, sector_from_lines
from ibpred.sectors.scaleless import is_scaleless, zero_sectors


def solvable(rows):
    """Whether ``rows . w = 1`` has a solution: Gauss elimination over Q, for comparison."""
    table = [[Fraction(x) for x in (*row, 1)] for row in rows]
    width = len(table[0]) - 1
    for column in range(width):
        pivot = next((r for r in table if r[column]), None)
        if pivot is None:
            continue
        table = [
            [x - r[column] / pivot[column] * y for x, y in zip(r, pivot, strict=True)]
            for r in table
            if r is not pivot
        ]
    return not any(r[width] for r in table)


@pytest.mark.parametrize(
    "family",
    [
        families.box(),
        families.sunrise("m2"),
        families.kite(),
        families.crossed_vertex(),
        families.heavy_self_energy(),
        families.bubble("m2", "0"),
        families.double_box(),
    ],
    ids=lambda family: family.name,
)
def test_every_sector_by_the_definition(family):
    """w . e = 1 for every monomial of U + F (Lee, arXiv:1310.1145), sector by sector, no shortcut."""
    U, F = symanzik(family)
    found = zero_sectors(family)
    for subset in range(1 << len(family.propagators)):
        sector = sector_from_lines([p for i, p in enumerate(family.propagators) if subset >> i & 1])
        u, f = U.restrict(sector), F.restrict(sector)
        rows = [[e[i] for i in lines_of(sector)] for e in (*u.terms, *f.terms)]
        expected = not u or solvable(rows)
        assert (sector in found) == expected, bin(sector)


@pytest.mark.parametrize(
    ("family", "nonzero"),
    [
        (families.bubble(), {0b11}),  # massless tadpoles vanish
        (families.bubble("m2", "0"), {0b01, 0b11}),
        (families.bubble("m2", "M2"), {0b01, 0b10, 0b11}),
        (families.box(), {0b0101, 0b1010, 0b0111, 0b1011, 0b1101, 0b1110, 0b1111}),
        (families.sunrise(), {0b111}),
    ],
)
def test_known_sectors(family, nonzero):
    count = len(family.propagators)
    assert set(range(1 << count)) - zero_sectors(family) == nonzero


def test_massless_line_on_the_light_cone_is_scaleless():
    family = families.make_family(
        "lightlike", "k", "p1 p2", "s", families.THREE_LEGS, ["k", "k+p1", "k+p1+p2"]
    )
    assert 0b011 in zero_sectors(family)
    assert 0b101 not in zero_sectors(family)


def test_planar_double_box_has_43_sectors():
    family = families.double_box()
    zero = zero_sectors(family)
    assert (1 << 7) - len(zero) == 43


def test_zero_sectors_are_closed_below():
    for family in (families.double_box("m2"), families.heavy_self_energy()):
        zero = zero_sectors(family)
        assert all(sector & ~(1 << i) in zero for sector in zero for i in lines_of(sector))


def test_sectors_without_a_cut_line_vanish():
    lines = ["k|m2|cut", "k+p1|m2", "k+p1+p2|m2|cut", "k+p1+p2+p3|m2"]
    family = families.make_family("cut_box", "k", "p1 p2 p3", "s t m2", families.FOUR_LEGS, lines)
    assert set(range(16)) - zero_sectors(family) == {0b0101, 0b0111, 0b1101, 0b1111}


def test_monomials():
    assert is_scaleless([(1, 0), (1, 1)])
    assert not is_scaleless([(1, 0), (2, 0)])
    assert is_scaleless([])
