"""Sums of integrals: linear in the reductions of their terms, and homogeneous."""

from __future__ import annotations

from pathlib import Path

import pytest

from ibpred.errors import InputError, UnfinishedError
from ibpred.exact.grammar import parse_rational
from ibpred.exact.primes import first_primes
from ibpred.family.reading import read_family
from ibpred.identities.quantities import combination
from ibpred.identities.rows import family_identities
from ibpred.reduction.masters import find_masters
from ibpred.reduction.sums import mass_dimension, reduce_sums
from ibpred.reduction.table import reduce_integrals
from ibpred.sectors.analysis import analyse

PRIMES = first_primes(20)
FILE = Path(__file__).parents[2] / "families" / "massless-box.toml"
BOX = read_family(FILE.read_text(encoding="utf-8"), FILE.name, "massless-box")
ANALYSIS = analyse(BOX)
MEMBERS = family_identities([BOX], [ANALYSIS])
MASTERS = find_masters(BOX, ANALYSIS, PRIMES[0], 1).masters
COMMON = [(0, powers) for powers in MASTERS]


def value(text):
    return parse_rational(text, BOX.full_ring)


def named(terms):
    return {(0, powers): coefficient for powers, coefficient in terms.items()}


def from_table(terms):
    """The sum term by term, by a table of reductions."""
    table = reduce_integrals(BOX, ANALYSIS, list(terms), MASTERS, PRIMES, 4)
    expected = {}
    for powers, coefficient in terms.items():
        for master, own in table.reductions[powers]:
            expected[master] = expected.get(master, BOX.full_ring.zero) + coefficient * own
    return {m: v for m, v in expected.items() if v}


def test_a_sum_is_the_sum_of_its_terms() -> None:
    terms = {
        (2, 1, 1, 1): value("s*t/(s+t)"),
        (1, 1, 1, 0): value("(d-3)/s"),
        (1, 1, 1, 1): value("-d*(s-t)/s"),
        (1, 1, 0, 0): value("7/t^2"),
    }
    found = reduce_sums(MEMBERS, {"A": named(terms), "nothing": {}}, COMMON, PRIMES, 3)
    assert dict(found.sums["A"]) == from_table(terms)
    assert found.sums["nothing"] == ()


def test_several_sums_and_integers_of_any_size() -> None:
    """Numerators and denominators far beyond machine integers."""
    huge = 10**40 + 7
    a = {
        (2, 1, 1, 1): value(f"{huge}*s*t/(s+t) - {huge**2}*d*s"),
        (1, 1, 1, 0): value(f"-{huge}*(d-3)/s"),
        (1, 1, 1, 1): value(f"(s-t)/(2^50*3^40*s*(d-{2**39})^2)"),
    }
    b = {(1, 2, 1, 1): value("1/(d-7)"), (1, 1, 2, 1): value("3/(d-7)"), (2, 1, 1, 1): value("s/t")}
    found = reduce_sums(MEMBERS, {"a": named(a), "b": named(b)}, COMMON, PRIMES, 3)
    assert dict(found.sums["a"]) == from_table(a)
    assert dict(found.sums["b"]) == from_table(b)


def test_a_factor_that_does_not_fit_is_refused() -> None:
    terms = named({(1, 1, 1, 1): parse_rational(f"1/(d-{2**89 - 1})", BOX.internal_ring)})
    with pytest.raises(UnfinishedError, match="too large"):
        combination("A", terms, BOX.internal_ring, 0)


def test_sums_that_vanish_need_no_reduction() -> None:
    found = reduce_sums(MEMBERS, {"A": named({(1, 1, 0, 0): value("d")})}, COMMON, PRIMES, 3)
    assert found.sums == {"A": ()}
    assert found.effort is None


def test_dimensions_must_agree() -> None:
    assert mass_dimension(value("(d-1)*s^2/(s+t)"), BOX) == 2
    assert mass_dimension(value("s+1"), BOX) is None
    with pytest.raises(InputError, match="not homogeneous"):
        reduce_sums(MEMBERS, {"A": named({(1, 1, 1, 1): value("s+1")})}, COMMON, PRIMES, 3)
    terms = {(1, 1, 1, 1): value("s"), (1, 1, 1, 0): value("s")}
    with pytest.raises(InputError, match="mass dimension"):
        reduce_sums(MEMBERS, {"A": named(terms)}, COMMON, PRIMES, 3)
