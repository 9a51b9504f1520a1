from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest
from canonical_forms import BOX_MASTERS, DOUBLE_BOX_MASTERS, FIELD, X, family
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import linprog

from ibpred.boundary.behaviour.approach import Approach, is_positive_before, leading, valuation
from ibpred.boundary.behaviour.polytope import lower_facets, separating_functional
from ibpred.boundary.behaviour.regions import (
    Behaviour,
    Exponent,
    ParametricFamily,
    behaviour,
    behaviour_of_closed_form,
    parametric_family,
)
from ibpred.boundary.problem import closed_form_on_line
from ibpred.errors import BoundaryError
from ibpred.exact.rational import Rational, ring
from ibpred.iterated.transport import INFINITY, Point

BOX_LINE = {"s": FIELD.constant(-1), "t": -X}
POINTS = st.lists(
    st.tuples(st.integers(0, 2), st.integers(0, 2), st.integers(0, 2), st.integers(0, 3)),
    min_size=5,
    max_size=12,
)


def on_line(name: str, values: dict[str, Rational]) -> ParametricFamily:
    return parametric_family(family(name), values)


ANALYTIC = (Exponent((Fraction(0),), (Fraction(0),), (False,)),)


def to(point: Point) -> Approach:
    return Approach((), "x", point)


def pairs(found: Behaviour | None) -> set[tuple[Fraction, Fraction]]:
    assert found is not None
    return {(*e.power, *e.slope) for e in found}


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
    assert pairs(behaviour(box, (1, 1, 1, 1), to(Fraction(0)))) == {(-1, -1), (0, 0)}
    assert pairs(behaviour(box, (1, 1, 1, 1), to(INFINITY))) == {(1, 0), (2, 1)}
    assert behaviour(box, (1, 1, 1, 1), to(Fraction(-1))) == ANALYTIC
    assert behaviour(box, (1, 1, 1, 1), to(Fraction(2))) == ANALYTIC


def test_exponents_of_closed_forms_agree_with_the_polytope() -> None:
    """The same integrals by two routes: Gamma functions and regions."""
    checked = 0
    for name, masters in (("massless-box", BOX_MASTERS), ("planar-double-box", DOUBLE_BOX_MASTERS)):
        defined, parametric = family(name), on_line(name, BOX_LINE)
        for powers in masters:
            closed = closed_form_on_line(defined, powers, BOX_LINE, FIELD, True)
            if closed is not None:
                checked += 1
                for point in (Fraction(0), INFINITY):
                    expected = behaviour_of_closed_form(closed, to(point))
                    assert behaviour(parametric, powers, to(point)) == expected
    assert checked == 6


def test_bubble_with_one_mass() -> None:
    """2F1(1, eps; 2 - eps; -x) with x = -s/m^2 behaves like x^-1 and x^-eps at large x."""
    bubble = on_line("bubble-one-mass", {"s": -X, "m2": FIELD.one})
    assert pairs(behaviour(bubble, (1, 1), to(INFINITY))) == {(1, 0), (0, 1)}
    assert behaviour(bubble, (1, 1), to(Fraction(0))) == ANALYTIC
    # the threshold
    assert pairs(behaviour(bubble, (1, 1), to(Fraction(-1)))) == {(0, 0), (1, -2)}


def test_numerators_shift_the_power() -> None:
    double_box = on_line("planar-double-box", BOX_LINE)
    plain = pairs(behaviour(double_box, (1, 1, 1, 1, 1, 1, 1, 0, 0), to(Fraction(0))))
    shifted = pairs(behaviour(double_box, (1, 1, 1, 1, 1, 1, 1, -1, 0), to(Fraction(0))))
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


TWO = ring(("eps", "x", "y"))


def test_limits_one_after_the_other() -> None:
    """A bubble with two masses, m1 << m2 << s, has the regions of both masses and the hard one."""
    x, y = TWO.variable("x"), TWO.variable("y")
    values = {"s": -TWO.one, "m1sq": x, "m2sq": y}
    bubble = parametric_family(family("bubble-distinct-masses"), values)
    corner = behaviour(bubble, (1, 1), Approach(("x",), "y", Fraction(0)))
    # x^(1-eps): light line soft; y^(1-eps): heavy line soft; both analytic otherwise
    assert {(e.power, e.slope) for e in corner or ()} == {
        ((1, 0), (-1, 0)),
        ((0, 1), (0, -1)),
        ((0, 0), (0, 0)),
    }
    assert not any(any(e.logs) for e in corner or ())


def test_orders_compare_one_quantity_after_the_other() -> None:
    x, y = TWO.variable("x"), TWO.variable("y")
    value = (x + y) ** 2 * x / (y - 2)
    assert leading(value, ("y",)) == ((0,), x**3 / -2)
    assert Approach(("x",), "y", Fraction(2)).orders(value) == (1, -1)


def test_positivity_up_to_a_point() -> None:
    assert is_positive_before((1 - X) ** 2 / X, "x", INFINITY)
    assert is_positive_before(1 - X, "x", Fraction(1))
    assert not is_positive_before(1 - X, "x", Fraction(2))
    assert is_positive_before(X**2 - 3 * X + 3, "x", INFINITY)
    assert not is_positive_before(X**2 - 3 * X + 1, "x", Fraction(1))
    assert is_positive_before(X**2 - 3 * X + 1, "x", Fraction(0))
