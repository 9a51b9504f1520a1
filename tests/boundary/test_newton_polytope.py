from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest
from canonical_forms import BOX_MASTERS, DOUBLE_BOX_MASTERS, FIELD, X, family
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import linprog

from ibpred.boundary.polytope import lower_facets, separating_functional
from ibpred.boundary.problem import closed_form_on_line
from ibpred.boundary.regions import (
    ANALYTIC,
    Behaviour,
    ParametricFamily,
    behaviour,
    behaviour_of_closed_form,
    parametric_family,
    valuation,
)
from ibpred.errors import BoundaryError
from ibpred.exact.rational import Rational
from ibpred.iterated.transport import INFINITY

BOX_LINE = {"s": FIELD.constant(-1), "t": -X}
POINTS = st.lists(
    st.tuples(st.integers(0, 2), st.integers(0, 2), st.integers(0, 2), st.integers(0, 3)),
    min_size=5,
    max_size=12,
)


def on_line(name: str, values: dict[str, Rational]) -> ParametricFamily:
    return parametric_family(family(name), values, "x")


def pairs(found: Behaviour | None) -> set[tuple[Fraction, Fraction]]:
    assert found is not None
    return {(e.power, e.slope) for e in found}


@settings(max_examples=60, deadline=None)
@given(POINTS, st.lists(st.integers(1, 9), min_size=12, max_size=12))
def test_facets_are_the_lower_hull(raw: list[tuple[int, ...]], weights: list[int]) -> None:
    """At any point of the projection the highest facet is the least p of the hull, by a linear program."""
    points = [(p[:3], p[3]) for p in sorted(set(raw))]
    try:
        facets = lower_facets(points)
    except BoundaryError:
        base = np.array([r for r, _ in points])
        assert np.linalg.matrix_rank(base - base[0]) < 3
        return
    used = np.array(weights[: len(points)], dtype=float)
    used /= used.sum()
    place = used @ np.array([r for r, _ in points], dtype=float)
    matrix = np.vstack([np.array([r for r, _ in points], dtype=float).T, np.ones(len(points))])
    least = linprog([p for _, p in points], A_eq=matrix, b_eq=[*place, 1.0], bounds=(0, None))
    highest = max(
        float(f.offset) - sum(float(v) * x for v, x in zip(f.normal, place, strict=True)) for f in facets
    )
    assert least.status == 0
    assert abs(least.fun - highest) < 1e-6


def test_scaleless_polytopes_are_refused() -> None:
    with pytest.raises(BoundaryError, match="scaleless"):
        lower_facets([((1, 0), 0), ((0, 1), 1)])


@given(st.lists(st.tuples(*[st.integers(0, 2)] * 3), min_size=1, max_size=5))
def test_separation_is_strict(points: list[tuple[int, ...]]) -> None:
    phi = (1, -2, 1)
    above = [p for p in points if sum(a * b for a, b in zip(phi, p, strict=True)) > 0]
    below = [p for p in points if sum(a * b for a, b in zip(phi, p, strict=True)) <= 0]
    found = separating_functional(above, below)
    assert found is not None
    for p in above:
        for q in below:
            assert sum(f * (a - b) for f, a, b in zip(found, p, q, strict=True)) > 0


def test_interleaved_sets_are_not_separated() -> None:
    assert separating_functional([(0, 0), (2, 2)], [(1, 1)]) is None
    assert separating_functional([(1, 1)], [(1, 1)]) is None


def test_massless_box() -> None:
    box = on_line("massless-box", BOX_LINE)
    # t-channel collinear regions x^(-1-eps), and the hard region
    assert pairs(behaviour(box, (1, 1, 1, 1), Fraction(0))) == {(-1, -1), (0, 0)}
    assert pairs(behaviour(box, (1, 1, 1, 1), INFINITY)) == {(1, 0), (2, 1)}
    assert behaviour(box, (1, 1, 1, 1), Fraction(-1)) == ANALYTIC
    assert behaviour(box, (1, 1, 1, 1), Fraction(2)) == ANALYTIC


def test_exponents_of_closed_forms_agree_with_the_polytope() -> None:
    """The same integrals by two routes: Gamma functions and regions."""
    checked = 0
    for name, masters in (("massless-box", BOX_MASTERS), ("planar-double-box", DOUBLE_BOX_MASTERS)):
        defined, parametric = family(name), on_line(name, BOX_LINE)
        for powers in masters:
            closed = closed_form_on_line(defined, powers, BOX_LINE, FIELD)
            if closed is not None:
                checked += 1
                for point in (Fraction(0), INFINITY):
                    expected = behaviour_of_closed_form(closed, "x", point)
                    assert behaviour(parametric, powers, point) == expected
    assert checked == 6


def test_bubble_with_one_mass() -> None:
    """2F1(1, eps; 2 - eps; -x) with x = -s/m^2 behaves like x^-1 and x^-eps at large x."""
    bubble = on_line("bubble-one-mass", {"s": -X, "m2": FIELD.one})
    assert pairs(behaviour(bubble, (1, 1), INFINITY)) == {(1, 0), (0, 1)}
    assert behaviour(bubble, (1, 1), Fraction(0)) == ANALYTIC
    # the threshold: nothing is claimed
    assert behaviour(bubble, (1, 1), Fraction(-1)) is None


def test_numerators_shift_the_power() -> None:
    double_box = on_line("planar-double-box", BOX_LINE)
    plain = pairs(behaviour(double_box, (1, 1, 1, 1, 1, 1, 1, 0, 0), Fraction(0)))
    shifted = pairs(behaviour(double_box, (1, 1, 1, 1, 1, 1, 1, -1, 0), Fraction(0)))
    assert plain == {(-1, -2), (0, 0)}
    assert shifted == {(0, -2), (0, 0)}


def test_valuations() -> None:
    value = X**2 * (X + 1) / (2 * X - 3)
    assert [valuation(value, "x", p) for p in (Fraction(0), Fraction(-1), Fraction(3, 2), INFINITY)] == [
        2,
        1,
        -1,
        -2,
    ]
    assert valuation(value, "x", Fraction(5)) == 0
