from fractions import Fraction

import flint
import pytest
from hypothesis import given
from hypothesis import strategies as st

from ibpred.balls.accuracy import is_accurate, until_accurate
from ibpred.balls.context import complex_ball, modulus_bound, precision, widened
from ibpred.balls.decimal import decimal_ball
from ibpred.errors import PrecisionError

fractions = st.fractions(min_value=-(10**9), max_value=10**9, max_denominator=10**12)


def test_precision_is_restored_after_an_error():
    before = flint.ctx.prec

    def fail():
        with precision(777):
            assert flint.ctx.prec == 777
            raise RuntimeError

    with pytest.raises(RuntimeError):
        fail()
    assert flint.ctx.prec == before


@given(fractions, fractions, st.integers(1, 40), st.integers(20, 200), st.integers(-60, 30))
def test_decimal_balls_hold_the_number(re, im, digits, bits, scale):
    factor = Fraction(10) ** scale
    exact = (re * factor, im * factor)
    found = decimal_ball(complex_ball(*exact, bits), digits)
    radius = Fraction(found.radius)
    for text, value in zip((found.re, found.im), exact, strict=True):
        assert abs(Fraction(text) - value) <= radius
        assert sum(c.isdigit() for c in text.split("e")[0].lstrip("-0.")) <= digits


@given(st.floats(-1e6, 1e6), st.floats(1e-20, 1e3), st.integers(1, 30))
def test_decimal_balls_hold_wide_balls(mid, rad, digits):
    ball = flint.acb(flint.arb(mid, rad))
    found = decimal_ball(ball, digits)
    lower, upper = Fraction(found.re) - Fraction(found.radius), Fraction(found.re) + Fraction(found.radius)
    assert lower <= Fraction(mid) - Fraction(rad)
    assert upper >= Fraction(mid) + Fraction(rad)


def test_decimal_layout():
    assert decimal_ball(flint.acb(-4), 30).re == "-4"
    assert decimal_ball(flint.acb(0), 30).radius == "0"
    third = decimal_ball(complex_ball(Fraction(1, 3), 0, 200), 10)
    assert third.re == "0.3333333333"
    assert third.im == "0"
    assert third.radius == "3.4e-11"
    assert decimal_ball(complex_ball(Fraction(1, 3 * 10**20), 0, 200), 4).re == "3.333e-21"
    with pytest.raises(PrecisionError, match="no finite ball"):
        decimal_ball(flint.acb("nan"), 5)


def test_widened_and_bounds():
    assert widened(flint.acb(1), flint.arb(0), 53).is_exact()
    wide = widened(flint.acb(1), flint.arb("0.25"), 53)
    assert wide.contains(flint.acb(1.25, 0.25))
    assert wide.contains(flint.acb(0.75, -0.25))
    assert modulus_bound(flint.acb(3, 4)) >= 5
    assert modulus_bound(flint.acb(0)).is_zero()


def test_until_accurate_raises_the_precision():
    tried = []

    def compute(bits):
        tried.append(bits)
        with precision(bits):
            return (flint.acb(1) + flint.acb("1e-15")) - 1  # loses 15 digits

    value = until_accurate(compute, lambda z: [z], 20, 64, 4000)
    assert is_accurate(value, 20)
    assert tried == sorted(tried)
    assert len(tried) > 1
    with pytest.raises(PrecisionError, match="max_bits = 100"):
        until_accurate(compute, lambda z: [z], 20, 64, 100)


def test_a_precision_error_asks_for_more_bits():
    def compute(bits):
        if bits < 150:
            raise PrecisionError("too few bits")
        return flint.acb(1)

    assert until_accurate(compute, lambda z: [z], 20, 64, 4000) == 1
    with pytest.raises(PrecisionError, match="too few bits"):
        until_accurate(compute, lambda z: [z], 20, 64, 100)


def test_zero_is_judged_absolutely():
    assert is_accurate(flint.acb(flint.arb(0, 1e-21)), 20)
    assert not is_accurate(flint.acb(flint.arb(0, 1e-19)), 20)
    assert not is_accurate(flint.acb("nan"), 3)
