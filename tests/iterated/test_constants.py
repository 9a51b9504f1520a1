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
from ibpred.iterated.constants.constants import Constant, log_of, zeta
from ibpred.iterated.constants.generators import GENERATORS, NAMES, monomial_weight, monomials_of_weight
from ibpred.iterated.constants.sixth_roots import log_sine_at_two_thirds

MONOMIALS = st.tuples(*(st.integers(0, 1 if name in ("I", "sqrt3") else 2) for name in NAMES))
CONSTANTS = st.dictionaries(MONOMIALS, st.fractions(-5, 5, max_denominator=7), max_size=3).map(
    Constant.from_terms
)


@given(CONSTANTS, CONSTANTS)
def test_arithmetic_agrees_with_balls(a: Constant, b: Constant) -> None:
    with precision(120):
        assert (a * b).ball(100).overlaps(a.ball(100) * b.ball(100))
        assert (a - b).ball(100).overlaps(a.ball(100) - b.ball(100))
    assert (a * b).polynomial.is_zero() or max((a * b).polynomial.degrees()[:2]) <= 1


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


def log_sine(power: int) -> mp.mpf:
    return mp.quad(lambda t: mp.log(2 * mp.sin(t / 2)) ** power, [0, mp.pi / 3, 2 * mp.pi / 3])


def test_balls_of_the_generators_against_mpmath() -> None:
    with mp.workdps(40):
        expected = {
            "I": mp.mpc(0, 1),
            "pi": mp.pi,
            "log2": mp.log(2),
            "log3": mp.log(3),
            "sqrt3": mp.sqrt(3),
            "clausen2": mp.clsin(2, mp.pi / 3),
            "clausen4": mp.clsin(4, mp.pi / 3),
            "logsine3": -log_sine(2),
            "logsine4": -log_sine(3),
            "li4half": mp.polylog(4, 0.5),
            "li5half": mp.polylog(5, 0.5),
            "li6half": mp.polylog(6, 0.5),
            "li51half": mp.nsum(lambda n: mp.mpf(2) ** -n / n**5 * mp.harmonic(n - 1), [2, mp.inf]),
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
    # a square root to the first power at most
    assert len(monomials_of_weight(1, {"sqrt3": 1, "pi": 1})) == 2


def test_square_roots() -> None:
    value = Constant.read("2*sqrt3*clausen2 - I*sqrt3*pi")
    assert str(value * Constant.generator("sqrt3")) == "-3*I*pi + 6*clausen2"
    assert str(Constant.generator("sqrt3") ** 5) == "9*sqrt3"
    assert value.weights() == {1, 2}
    assert value.latex() == (r"-\mathrm{i} \sqrt{3} \pi + 2 \sqrt{3} \mathrm{Cl}_2(\tfrac{\pi}{3})")


def test_log_sines_beyond_four_are_refused() -> None:
    with pytest.raises(ValueError, match="not 5"):
        log_sine_at_two_thirds(5, 100)
