from __future__ import annotations

from fractions import Fraction

import flint
import pytest
from hypothesis import given
from hypothesis import strategies as st
from mpmath import mp

from ibpred.balls.context import precision
from ibpred.errors import ExpressionError
from ibpred.exact.codec import from_data, to_data
from ibpred.iterated.constants import (
    GENERATORS,
    NAMES,
    Constant,
    log_of,
    monomial_weight,
    monomials_of_weight,
    zeta,
)

MONOMIALS = st.tuples(*(st.integers(0, 1 if name == "I" else 2) for name in NAMES))
CONSTANTS = st.dictionaries(MONOMIALS, st.fractions(-5, 5, max_denominator=7), max_size=3).map(
    Constant.from_terms
)


@given(CONSTANTS, CONSTANTS)
def test_arithmetic_agrees_with_balls(a: Constant, b: Constant) -> None:
    with precision(120):
        assert (a * b).ball(100).overlaps(a.ball(100) * b.ball(100))
        assert (a - b).ball(100).overlaps(a.ball(100) - b.ball(100))
    assert (a * b).polynomial.is_zero() or (a * b).polynomial.degrees()[0] <= 1


@given(CONSTANTS)
def test_text_is_read_back(a: Constant) -> None:
    assert Constant.read(str(a)) == a
    assert from_data(Constant, to_data(a)) == a
    assert a.real() + Constant.generator("I") * a.imaginary() == a


@given(st.integers(1, 4))
def test_division_only_by_rationals(n: int) -> None:
    pi = Constant.generator("pi")
    assert pi / n * n == pi
    with pytest.raises(ZeroDivisionError, match="transcendental"):
        Constant.rational(n) / pi


def test_balls_of_the_generators_against_mpmath() -> None:
    with mp.workdps(40):
        expected = {
            "I": mp.mpc(0, 1),
            "pi": mp.pi,
            "log2": mp.log(2),
            "log3": mp.log(3),
            "li4half": mp.polylog(4, 0.5),
            "li5half": mp.polylog(5, 0.5),
            "zeta53": mp.nsum(lambda n: n**-5 * (mp.zeta(3) - mp.zeta(3, n)), [1, mp.inf]),
        } | {f"zeta{n}": mp.zeta(n) for n in (3, 5, 7, 9, 11)}
        assert set(expected) == set(NAMES)
        for name, value in expected.items():
            ball = Constant.generator(name).ball(110)
            assert ball.rad() < flint.arb(2) ** -95, name
            with precision(140):
                digits = mp.nstr(mp.mpc(value).real, 30, strip_zeros=False)
                assert abs(ball.real - flint.arb(digits)) < flint.arb("1e-28"), name
                assert abs(ball.imag - flint.arb(int(name == "I"))) < flint.arb("1e-28"), name


def test_even_zeta_values_are_eulers() -> None:
    assert str(zeta(2)) == "pi^2/6"
    assert str(zeta(4)) == "pi^4/90"
    for n in (6, 8, 10):
        with precision(140):
            assert zeta(n).ball(120).real.overlaps(flint.arb(n).zeta())


def test_text_and_latex() -> None:
    value = Constant.read("-7/4*zeta3 + pi^4/90")
    assert str(value) == "pi^4/90 - 7*zeta3/4"
    assert value.latex() == r"\frac{\pi^{4}}{90} - \frac{7 \zeta_3}{4}"
    assert value.weights() == {3, 4}
    assert str(value.part(3)) == "-7*zeta3/4"
    with pytest.raises(ExpressionError, match="unknown symbol 'zeta4'"):
        Constant.read("zeta4")


def test_logarithms_of_rationals() -> None:
    assert str(log_of(Fraction(9, 8))) == "-3*log2 + 2*log3"
    with pytest.raises(KeyError, match="log5"):
        log_of(Fraction(5))


def test_monomials_of_a_weight() -> None:
    steps = {"pi": 2, "zeta3": 1, "zeta5": 1, "zeta7": 1, "zeta53": 1}
    # Zagier's dimensions 1, 0, 1, 1, 1, 2, 2, 3, 4: d_n = d_(n-2) + d_(n-3)
    assert [len(monomials_of_weight(w, steps)) for w in range(9)] == [1, 0, 1, 1, 1, 2, 2, 3, 4]
    assert all(monomial_weight(m) == 8 for m in monomials_of_weight(8, steps))
    assert GENERATORS[0].weight == 0
