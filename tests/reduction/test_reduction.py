"""Reductions against closed forms in Gamma functions and against the identities themselves."""

from __future__ import annotations

import random
from functools import cache
from pathlib import Path

import mpmath
import pytest
from kites import TEXT, bubble_value, kite_value

from ibpred.errors import InputError, UnfinishedError
from ibpred.exact.primes import first_primes
from ibpred.family.definition import FamilyDefinition
from ibpred.family.reading import read_family
from ibpred.identities.quantities import template_at
from ibpred.identities.templates import ibp_templates
from ibpred.reduction.masters import Masters, find_masters
from ibpred.reduction.table import ReductionTable, reduce_integrals
from ibpred.sectors.analysis import SectorAnalysis, analyse

FAMILIES = Path(__file__).parents[2] / "families"
PRIMES = first_primes(20)


@cache
def family_of(name: str) -> tuple[FamilyDefinition, SectorAnalysis]:
    file = FAMILIES / f"{name}.toml"
    family = read_family(file.read_text(encoding="utf-8"), file.name, name)
    return family, analyse(family)


@cache
def masters_of(name: str) -> Masters:
    family, analysis = family_of(name)
    return find_masters(family, analysis, PRIMES[0], 1)


def reduced(name: str, wanted: list[tuple[int, ...]]) -> ReductionTable:
    family, analysis = family_of(name)
    return reduce_integrals(family, analysis, wanted, masters_of(name).masters, PRIMES, 11)


# planar + crossed massless form factor together have the four masters of Gonsalves, Phys. Rev. D28 (1983)
# 1542; the eight of the double box: Smirnov, Veretin, hep-ph/9907385
@pytest.mark.parametrize(
    ("name", "count"),
    [
        ("tadpole", 1),
        ("bubble", 1),
        ("bubble-two-masses", 2),
        ("massless-box", 3),
        ("box-one-leg", 4),
        ("sunrise", 1),
        ("sunrise-equal-masses", 3),
        ("kite", 2),
        ("planar-vertex", 3),
        ("crossed-vertex", 3),
        ("planar-double-box", 8),
    ],
)
def test_number_of_masters(name: str, count: int) -> None:
    found = masters_of(name)
    assert len(found.masters) == count
    assert found.trials[-1].count == found.trials[-2].count == count


def test_masters_do_not_depend_on_prime_and_seed() -> None:
    family, analysis = family_of("kite")
    other = find_masters(family, analysis, PRIMES[5], 77)
    assert other.masters == masters_of("kite").masters


def number(value, values):
    """A rational function at floating-point values."""
    names = value.ring.names

    def of(polynomial):
        total = mpmath.mpf(0)
        for exponents, c in polynomial.to_dict().items():
            term = mpmath.mpf(int(c))
            for name, e in zip(names, exponents, strict=True):
                term *= values[name] ** int(e)
            total += term
        return total

    return of(value.numerator) / of(value.denominator)


def test_bubble_with_any_powers() -> None:
    wanted = [(a, b) for a in range(1, 4) for b in range(1, 4)]
    table = reduced("bubble", wanted)
    d = mpmath.mpf("3.7")
    for (a, b), row in table.reductions.items():
        ((master, coefficient),) = row
        assert table.masters[master] == (1, 1)
        value = number(coefficient, {"d": d, "s": mpmath.mpf(-1)}) * bubble_value(1, 1, d)
        assert mpmath.almosteq(value, bubble_value(a, b, d), 1e-12)


def kite_table(wanted: list[tuple[int, ...]]) -> ReductionTable:
    family = read_family(TEXT, "kite.toml", "kite")
    analysis = analyse(family)
    masters = find_masters(family, analysis, PRIMES[0], 1).masters
    return reduce_integrals(family, analysis, wanted, masters, PRIMES, 11)


def test_contracted_kites_against_chains_of_bubbles() -> None:
    rng = random.Random(2)
    wanted = []
    for _ in range(40):
        powers = [rng.randrange(1, 3) for _ in range(5)]
        powers[rng.randrange(5)] = 0
        if sum(powers) <= 6:
            wanted.append(tuple(powers))
    table = kite_table(wanted)
    d = mpmath.mpf("3.3")
    values = {"d": d, "s": mpmath.mpf(-1)}
    masters = [kite_value(m, d) for m in table.masters]
    assert len(table.reductions) > 10
    for powers, row in table.reductions.items():
        total = sum((number(c, values) * masters[m] for m, c in row), mpmath.mpf(0))
        assert mpmath.almosteq(total, kite_value(powers, d), 1e-10), powers


def test_kite_by_the_triangle_rule() -> None:
    """(d-4) K = 2 (I(2,1,1,1,0) - I(2,0,1,1,1)): Chetyrkin, Tkachov, Nucl. Phys. B192 (1981) 159."""
    table = kite_table([(1, 1, 1, 1, 1)])
    d = mpmath.mpf("3.3")
    values = {"d": d, "s": mpmath.mpf(-1)}
    total = sum(number(c, values) * kite_value(table.masters[m], d) for m, c in table.reductions[(1,) * 5])
    rule = 2 / (d - 4) * (kite_value((2, 1, 1, 1, 0), d) - kite_value((2, 0, 1, 1, 1), d))
    assert mpmath.almosteq(total, rule, 1e-10)


@pytest.mark.parametrize("name", ["massless-box", "sunrise-equal-masses"])
def test_tables_satisfy_the_identities_exactly(name: str) -> None:
    family, _ = family_of(name)
    rng = random.Random(4)
    equations = []
    for template in ibp_templates(family):
        powers = tuple(
            rng.choice((0, -1)) if line.numerator else rng.choice((0, 1, 1, 2)) for line in family.lines
        )
        equations.append(template_at(template, powers))
    wanted = sorted({powers for equation in equations for powers, _ in equation.terms})
    table = reduced(name, wanted)
    for equation in equations:
        total: dict[int, object] = {}
        for powers, polynomial in equation.terms:
            factor = family.internal_ring.zero
            for exponents, c in polynomial.items():
                term = family.internal_ring.constant(c)
                for variable, e in zip(family.internal_ring.names, exponents, strict=True):
                    term = term * family.internal_ring.variable(variable) ** e
                factor = factor + term
            for master, value in table.reductions[powers]:
                at_one = value.substitute(
                    {family.unit: family.internal_ring.one}
                    | {v: family.internal_ring.variable(v) for v in family.internal_ring.names}
                )
                total[master] = total.get(master, family.internal_ring.zero) + factor * at_one
        assert not any(total.values())


def test_zero_sectors_and_masters_themselves() -> None:
    table = reduced("massless-box", [(1, 1, 0, 0), (1, 1, 1, 1), (0, 0, 0, 0)])
    assert table.reductions[1, 1, 0, 0] == ()
    assert table.reductions[0, 0, 0, 0] == ()
    ((master, value),) = table.reductions[1, 1, 1, 1]
    assert table.masters[master] == (1, 1, 1, 1)
    assert value.is_one()


def test_nothing_but_zeros() -> None:
    table = reduced("massless-box", [(1, 1, 0, 0)])
    assert table.reductions == {(1, 1, 0, 0): ()}
    assert table.evidence == ()


def test_equivalent_sectors_share_masters() -> None:
    # the two triangles of the massless box with a leg s, and the t ones
    table = reduced("massless-box", [(1, 1, 1, 0), (1, 0, 1, 1), (0, 1, 1, 1), (1, 1, 0, 1)])
    rows = list(table.reductions.values())
    assert rows[0] == rows[1]
    assert rows[2] == rows[3]


def test_wrong_integrals_are_refused() -> None:
    with pytest.raises(InputError, match="9 powers are needed, 4 are given"):
        reduced("planar-double-box", [(1, 1, 1, 1)])
    with pytest.raises(InputError, match="is a numerator"):
        reduced("planar-double-box", [(1, 1, 1, 1, 1, 1, 1, 1, 0)])


def test_missing_master_is_noticed() -> None:
    family, analysis = family_of("massless-box")
    with pytest.raises(UnfinishedError, match=r"massless-box\(2,1,1,1\)"):
        reduce_integrals(family, analysis, [(2, 1, 1, 1)], masters_of("massless-box").masters[:2], PRIMES, 1)


def test_preferred_masters() -> None:
    family, analysis = family_of("massless-box")
    wish = [(2, 0, 1, 0), (0, 2, 0, 1)]
    found = find_masters(family, analysis, PRIMES[0], 1, preferred=wish)
    assert found.masters == ((2, 0, 1, 0), (0, 2, 0, 1), (1, 1, 1, 1))
    with pytest.raises(InputError, match="its sector has no masters"):
        find_masters(family, analysis, PRIMES[0], 1, preferred=[(1, 1, 1, 0)])
    with pytest.raises(InputError, match="scaleless"):
        find_masters(family, analysis, PRIMES[0], 1, preferred=[(1, 1, 0, 0)])
