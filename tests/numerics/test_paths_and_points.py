from fractions import Fraction
from itertools import pairwise

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ibpred.errors import InputError, PointError
from ibpred.iterated.constants.constants import Constant
from ibpred.numerics.forms.canonical import linear_system
from ibpred.numerics.forms.masters import Row
from ibpred.numerics.forms.path import Infinity, Regular, Target, plan
from ibpred.numerics.forms.point import kinematic_point
from ibpred.numerics.forms.power_series import EPSILON
from ibpred.numerics.forms.vanishing import vanishes

F = Fraction
rationals = st.fractions(-8, 8, max_denominator=30)


@settings(deadline=None, max_examples=60)
@given(
    st.sets(rationals, min_size=1, max_size=5),
    st.fractions(F(1, 50), 40, max_denominator=50),
    st.sampled_from([0, 1, -1]),
)
def test_plans_are_chains_of_discs(points, modulus, half_turns):
    letters = sorted(points | {F(0)})
    target = Target(modulus, half_turns)
    system = linear_system(letters, [[[1]]] * len(letters))
    if target.value in letters:
        with pytest.raises(PointError, match="singularity"):
            plan(system, target)
        return
    steps = plan(system, target)
    assert steps[-1].end == (target.value, 0)
    start = None
    for step in steps:
        assert step.end[1] * (half_turns or 1) >= 0
        for point in (step.end, start):
            if point is not None:
                assert float(_ratio(step.disc, point, letters)) <= 0.701
        start = step.end


def _ratio(disc, point, letters):
    """Distance from the centre over the radius of convergence, squared fractions compared exactly."""
    if isinstance(disc, Infinity):
        return abs(max(letters, key=abs)) / abs(complex(*map(float, point)))
    centre = disc.point if isinstance(disc, Regular) else (disc.point, F(0))
    others = [a for a in letters if (a, 0) != centre]
    if not others:
        return 0

    def distance(a, b):
        return float((a[0] - b[0]) ** 2 + (a[1] - b[1]) ** 2) ** 0.5

    return distance(point, centre) / min(distance((a, F(0)), centre) for a in others)


def test_few_steps_where_few_are_needed():
    system = linear_system((0, -1), ([[1]], [[1]]))
    counts = {
        x: len(plan(system, Target(F(x), 0))) for x in ("1/3", "2/3", "1", "2", "1000", "1000000000000")
    }
    assert counts["1/3"] == counts["2/3"] == 1
    assert counts["1"] == 2
    assert max(counts.values()) <= 4
    near = plan(system, Target(1 - F(1, 10**30), 1))
    assert len(near) <= 3
    assert all(a.end != b.end for a, b in pairwise(near))


SIGNS = {"s": -1, "t": -1, "m2": 1}
DIMENSIONS = {"s": 2, "t": 2, "m2": 2}


def test_phases():
    def point(s, t, m2, unit="s"):
        values = {"s": F(s), "t": F(t), "m2": F(m2)}
        return kinematic_point(values, SIGNS, unit, DIMENSIONS, ("m2",))

    euclidean = point(-2, -3, 5)
    assert euclidean.unit == Target(F(2), 0)
    assert euclidean.ratios == {"t": Target(F(3, 2), 0), "m2": Target(F(5, 2), 0)}
    # s + i0: -s - i0 = |s| exp(-i pi); ratios over it gain +pi
    physical = point(2, -3, 5)
    assert physical.unit == Target(F(2), -1)
    assert physical.ratios == {"t": Target(F(3, 2), 1), "m2": Target(F(5, 2), 1)}
    crossed = point(-2, 3, 5)
    assert crossed.ratios == {"t": Target(F(3, 2), -1), "m2": Target(F(5, 2), 0)}
    both = point(2, 3, 5)
    assert both.ratios["t"] == Target(F(3, 2), 0)
    assert point(2, 3, 5, "m2").ratios["s"] == Target(F(2, 5), -1)


def test_wrong_points():
    good = {"s": F(1), "t": F(-1), "m2": F(1)}

    def read(values, **changes):
        return kinematic_point(values, SIGNS, "s", DIMENSIONS | changes, ("m2",))

    with pytest.raises(PointError, match="lacks a value for t, m2"):
        read({"s": F(1)})
    with pytest.raises(PointError, match=r"unknown invariant 'm'; did you mean 'm2'\?"):
        read(good | {"m": F(1)})
    with pytest.raises(PointError, match="t = 0"):
        read(good | {"t": F(0)})
    with pytest.raises(PointError, match="squared mass m2 = -1 is negative"):
        read(good | {"m2": F(-1)})
    with pytest.raises(InputError, match="choose another unit"):
        read(good, t=3)
    with pytest.raises(InputError, match="no point of the principal sheet"):
        plan(linear_system((0,), ([[1]],)), Target(F(1), 2))


def test_exact_zeros_are_found_by_words():
    # f = (1, x^eps, x^-eps): f_2 + f_3 - 2 f_1 = O(eps^2), f_2 - f_3 = O(eps)
    system = linear_system((0,), ([[0, 0, 0], [0, 1, 0], [0, 0, -1]],))
    one, zero = Constant.rational(1), Constant.rational(0)
    constants = ((one,) * 3, *[(zero,) * 3] * 4)

    def row(*values):
        entries = tuple(EPSILON.constant(v) / EPSILON.variable("eps") for v in values)
        return Row((1,), (F(0), F(0)), entries)

    matrices = [letter.rows for letter in system.letters]
    even, odd = row(-2, 1, 1), row(0, 1, -1)
    assert [vanishes(even, matrices, constants, 0, k) for k in (-1, 0, 1, 2)] == [True, True, False, True]
    assert [vanishes(odd, matrices, constants, 0, k) for k in (-1, 0, 1, 2)] == [True, False, True, False]
    assert not vanishes(row(1, 1, 1), matrices, constants, 0, -1)
