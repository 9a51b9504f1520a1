"""Values at points on singularities: limits of the expansions there, where they exist."""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path

import pytest
from mpmath import mp, mpc, mpf

from ibpred.balls.decimal import DecimalBall
from ibpred.errors import PointError
from ibpred.numerics.value import Value
from ibpred.progress import SILENT
from ibpred.run.chain.chain import Chain
from ibpred.run.storage.files import read_family_file
from ibpred.run.storage.store import Store
from ibpred.run.values.evaluate import evaluate

FAMILIES = Path(__file__).parents[2] / "families"
F = Fraction


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    return tmp_path_factory.mktemp("store")


def value_at(name, folder, point, powers, order=0, digits=25):
    exact = {key: F(value) for key, value in point.items()}
    with Store(folder / name) as store:
        chain = Chain(read_family_file(FAMILIES / f"{name}.toml"), store, SILENT, 1)
        (value,) = evaluate(chain, exact, (powers,), order, digits)
    return value


def number(value, order):
    ball = value.epsilon[order]
    return mpc(ball.re, ball.im)


def test_regular_at_zero_momentum(folder):
    # F stays positive: B0(0) = Gamma(eps) e^(eps gamma_E) m^(-2 eps), at m^2 = 2
    value = value_at("bubble-two-masses", folder, {"s": 0, "m2": 2}, (1, 1), 2)
    assert value.certified
    with mp.workdps(40):
        exact = mp.taylor(lambda e: mp.gamma(1 + e) * mp.exp(e * (mp.euler - mp.log(2))), 0, 3)
        for order in range(-1, 3):
            assert abs(number(value, order) - exact[order + 1]) < 1e-24


def test_finite_at_threshold(folder):
    # B0 = 1/eps + 2 at s = 4 m^2 = 4
    value = value_at("bubble-two-masses", folder, {"s": 4, "m2": 1}, (1, 1))
    assert not value.certified
    with mp.workdps(40):
        assert abs(number(value, -1) - 1) < 1e-24
        assert abs(number(value, 0) - 2) < 1e-24


def test_limits_from_both_sides_of_the_reduction(folder):
    # on the mass shell s = m^2 = 3 of one massive line: e^(eps gamma_E) Gamma(eps) m^(-2 eps)/(1 - 2 eps)
    value = value_at("bubble-one-mass", folder, {"s": 3, "m2": 3}, (1, 1), 0)
    with mp.workdps(40):
        assert abs(number(value, 0) - (2 - mp.log(3))) < 1e-24
    # with a dot on the massless line it is divergent there
    with pytest.raises(PointError, match=r"no limit at the singular point .* log\(h\)"):
        value_at("bubble-one-mass", folder, {"s": 3, "m2": 3}, (1, 2), 0)


@pytest.mark.slow
def test_where_singularities_meet(folder):
    # s = t = 0 of the box of massive lines: all external momenta vanish, the integral of (m^2 - k^2)^-4
    value = value_at("box-massive-loop", folder, {"s": 0, "t": 0, "m2": 1}, (1, 1, 1, 1))
    assert abs(number(value, 0) - mpf(1) / 6) < 1e-15
    with pytest.raises(PointError, match="meet at"):
        value_at("massless-box", folder, {"s": 0, "t": 0}, (1, 1, 1, 1))


def test_no_limit(folder):
    with pytest.raises(PointError, match=r"no limit at .* h\^\(-1\).*--approach"):
        value_at("massless-box", folder, {"s": 1, "t": 0}, (1, 1, 1, 1))
    # but u = 0 is none on the physical sheet of the planar box
    value = value_at("massless-box", folder, {"s": 1, "t": -1}, (1, 1, 1, 1))
    near = value_at("massless-box", folder, {"s": 1, "t": -1 + F(1, 10**12)}, (1, 1, 1, 1))
    for order in (-2, -1, 0):
        assert abs(number(value, order) - number(near, order)) < 1e-10


def test_digits_of_a_vanishing_coefficient():
    known, zero = DecimalBall("-20.5", "0", "1e-30"), DecimalBall("1e-42", "0", "1e-31")
    assert Value((1,), {-1: known, 0: zero}, False).digits() == 31
    assert Value((1,), {0: zero}, False).digits() == 31
    assert Value((1,), {0: DecimalBall("3", "0", "0")}, True).digits() is None
