"""Sums of integrals: linear in the reductions of their terms, and homogeneous."""

from __future__ import annotations

from pathlib import Path

import pytest

from ibpred.errors import InputError
from ibpred.exact.grammar import parse_rational
from ibpred.exact.primes import first_primes
from ibpred.family.reading import read_family
from ibpred.reduction.masters import find_masters
from ibpred.reduction.sums import mass_dimension, reduce_sums
from ibpred.reduction.table import reduce_integrals
from ibpred.sectors.analysis import analyse

PRIMES = first_primes(20)
FILE = Path(__file__).parents[2] / "families" / "massless-box.toml"
BOX = read_family(FILE.read_text(encoding="utf-8"), FILE.name, "massless-box")
ANALYSIS = analyse(BOX)
MASTERS = find_masters(BOX, ANALYSIS, PRIMES[0], 1).masters


def value(text):
    return parse_rational(text, BOX.full_ring)


def test_a_sum_is_the_sum_of_its_terms() -> None:
    terms = {
        (2, 1, 1, 1): value("s*t/(s+t)"),
        (1, 1, 1, 0): value("(d-3)/s"),
        (1, 1, 1, 1): value("-d*(s-t)/s"),
        (1, 1, 0, 0): value("7/t^2"),
    }
    found = reduce_sums(BOX, ANALYSIS, {"A": terms, "nothing": {}}, MASTERS, PRIMES, 3)
    table = reduce_integrals(BOX, ANALYSIS, list(terms), MASTERS, PRIMES, 4)
    expected = {}
    for powers, coefficient in terms.items():
        for master, own in table.reductions[powers]:
            expected[master] = expected.get(master, BOX.full_ring.zero) + coefficient * own
    assert dict(found.sums["A"]) == {m: v for m, v in expected.items() if v}
    assert found.sums["nothing"] == ()


def test_sums_that_vanish_need_no_reduction() -> None:
    found = reduce_sums(BOX, ANALYSIS, {"A": {(1, 1, 0, 0): value("d")}}, MASTERS, PRIMES, 3)
    assert found.sums == {"A": ()}
    assert found.effort is None


def test_dimensions_must_agree() -> None:
    assert mass_dimension(value("(d-1)*s^2/(s+t)"), BOX) == 2
    assert mass_dimension(value("s+1"), BOX) is None
    with pytest.raises(InputError, match="not homogeneous"):
        reduce_sums(BOX, ANALYSIS, {"A": {(1, 1, 1, 1): value("s+1")}}, MASTERS, PRIMES, 3)
    terms = {(1, 1, 1, 1): value("s"), (1, 1, 1, 0): value("s")}
    with pytest.raises(InputError, match="mass dimension"):
        reduce_sums(BOX, ANALYSIS, {"A": terms}, MASTERS, PRIMES, 3)
