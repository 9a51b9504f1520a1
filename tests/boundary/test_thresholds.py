"""Exponents at thresholds against the phase space of the particles produced there."""

from __future__ import annotations

from decimal import Decimal
from fractions import Fraction
from itertools import combinations
from pathlib import Path

import pytest
from canonical_forms import FIELD, X, family

from ibpred.boundary.behaviour.approach import Approach
from ibpred.boundary.behaviour.regions import behaviour, parametric_family
from ibpred.boundary.behaviour.thresholds import Monomials, is_separated, threshold_exponents
from ibpred.boundary.problem import region_values
from ibpred.exact.rational import Rational
from ibpred.progress import Silent
from ibpred.run.chain.chain import Chain
from ibpred.run.constants.known_points import auxiliary_at
from ibpred.run.constants.solved import solution
from ibpred.run.storage.store import Store
from ibpred.run.values.evaluate import evaluate

HARD = (Fraction(0), Fraction(0))


def banana(masses: list[int]) -> dict[tuple[int, ...], Rational]:
    """U + F of two vertices joined by lines of these masses, x = -p^2."""
    size = len(masses)
    terms: dict[tuple[int, ...], Rational] = {}
    for chosen in combinations(range(size), size - 1):
        tree = tuple(int(i in chosen) for i in range(size))
        terms[tree] = FIELD.one
        for i, mass in enumerate(masses):
            power = tuple(n + (k == i) for k, n in enumerate(tree))
            terms[power] = terms.get(power, FIELD.zero) + mass * mass
    terms[(1,) * size] += X
    return terms


@pytest.mark.parametrize(
    "masses",
    [
        [1, 1],
        [1, 2],
        [3, 2],
        [1, 1, 1],
        [2, 2, 2],
        [1, 2, 3],
        [5, 3, 2],
        pytest.param([1, 1, 1, 1], marks=pytest.mark.slow),
        pytest.param([1, 2, 3, 4], marks=pytest.mark.slow),
    ],
)
def test_thresholds_of_bananas_have_the_exponent_of_phase_space(masses: list[int]) -> None:
    """n particles at rest: phase space ~ (s - M^2)^((n-1)(d-1)/2 - 1)."""
    count = len(masses)
    piece = Monomials(0, (1,) * count, 0)
    found = threshold_exponents(banana(masses), [piece], 4, "x", -(Fraction(sum(masses)) ** 2))
    expected = (Fraction(3 * (count - 1), 2) - 1, Fraction(1 - count))
    assert found is not None
    assert set(found) == {HARD, expected}


@pytest.mark.parametrize(("masses", "point"), [([1, 2], -1), ([1, 1, 1], -1), ([1, 2, 3], -16)])
def test_pseudo_thresholds_are_regular(masses: list[int], point: int) -> None:
    piece = Monomials(0, (1,) * len(masses), 0)
    found = threshold_exponents(banana(masses), [piece], 4, "x", Fraction(point))
    assert found is not None
    assert set(found) == {HARD}


def test_dots_and_numerators_shift_powers_by_integers() -> None:
    """``d/dm^2`` of the bubble falls by one power of s - 4 m^2."""
    found = threshold_exponents(banana([1, 1]), [Monomials(0, (2, 1), 0)], 4, "x", Fraction(-4))
    assert found is not None
    assert set(found) == {HARD, (Fraction(-1, 2), Fraction(-1))}


def test_a_way_that_is_not_free_is_refused() -> None:
    """Where x^2 stands alone half a turn of x goes round twice."""
    terms = {(1, 0): FIELD.one, (0, 1): FIELD.one, (2, 0): FIELD.one, (1, 1): X**2, (0, 2): FIELD.one}
    assert threshold_exponents(terms, [Monomials(0, (1, 1), 0)], 4, "x", Fraction(-2)) is None
    # not monotonic: x + 1/x turns back at x = -1
    terms[1, 1] = X + 1 / X
    assert threshold_exponents(terms, [Monomials(0, (1, 1), 0)], 4, "x", Fraction(-2)) is None


def test_ramified_variable() -> None:
    """s = -m^2 (1-x)^2/x: s - 4 m^2 vanishes like (1+x)^2."""
    bubble = family("bubble-two-masses")
    values = {"s": -((X - 1) ** 2) / X, "m2": FIELD.one}
    found = behaviour(parametric_family(bubble, values), (1, 1), Approach((), "x", Fraction(-1)))
    assert found is not None
    assert {(e.power[0], e.slope[0]) for e in found} == {HARD, (Fraction(1), Fraction(-2))}


def test_beyond_a_massless_threshold() -> None:
    """Triangle of two massless lines and a massive one: t = 4 m^2 is no singularity of its first sheet."""
    for value, point in ((X, -4), ((X - 1) ** 2 / X, -1)):
        terms = {(0, 0, 2): FIELD.one, (1, 1, 0): value}
        assert is_separated(terms, "x", Fraction(point))
    # where a term vanishes nothing is claimed
    assert not is_separated({(0, 0, 2): FIELD.one, (1, 1, 0): X + 4}, "x", Fraction(-4))


def test_massless_and_massive_particle() -> None:
    """At s = m^2 the massless one is soft: (s - m^2)^(d-3)."""
    bubble = family("bubble-one-mass")
    signs = {"s": -1, "m2": 1}
    values = region_values(bubble, signs, FIELD, ("x",))
    found = behaviour(parametric_family(bubble, values), (1, 1), Approach((), "x", Fraction(-1)))
    assert found is not None
    assert {(e.power[0], e.slope[0]) for e in found} == {HARD, (Fraction(1), Fraction(-2))}


@pytest.mark.slow
def test_the_vertex_on_a_massive_line_needs_its_threshold(tmp_path: Path) -> None:
    """Two-loop vertex, letters x, 1+x, 1-x (Bonciani, Mastrolia, Remiddi, hep-ph/0301170): no fit."""
    with Store(tmp_path) as store:
        chain = Chain(family("planar-vertex-massive-fermion"), store, Silent(), 1)
        boundary, solved = chain.boundary(4), solution(chain, 4)
    assert not boundary.fitted
    assert boundary.start == 0
    assert solved.is_pure()
    threshold = [e for e in boundary.evidence if e.condition == "no exponent 2*eps at w = -1"]
    assert sum(e.independent for e in threshold) > 0
    assert sum(e.confirming for e in boundary.evidence) > 1000


@pytest.mark.slow
def test_the_vertex_on_a_massive_line_against_the_auxiliary_mass(tmp_path: Path) -> None:
    """All ten masters at s = -m^2/3 to twenty digits; the two routes share the differential equation only."""
    point = {"s": Fraction(-1, 3), "m2": Fraction(1)}
    with Store(tmp_path) as store:
        chain = Chain(family("planar-vertex-massive-fermion"), store, Silent(), 1)
        solved = evaluate(chain, point, (), 0, 20)
        others = auxiliary_at(chain, point, 0, 20)
    for ours, theirs in zip(solved, others, strict=True):
        assert ours.certified
        for order, value in ours.epsilon.items():
            other = theirs.epsilon[order]
            assert abs(Decimal(value.re) - Decimal(other.re)) < Decimal("1e-18") * (
                1 + abs(Decimal(value.re))
            )
