"""Expansions in the distance from singular points, against values near them."""

from __future__ import annotations

import math
from fractions import Fraction
from pathlib import Path

import pytest
from mpmath import log as mplog
from mpmath import mp, mpc, mpf

from ibpred.errors import PointError
from ibpred.exact.grammar import parse_rational
from ibpred.exact.rational import ring
from ibpred.numerics.laurent.distance import entry_terms
from ibpred.progress import SILENT
from ibpred.run.chain.chain import Chain
from ibpred.run.storage.files import read_family_file
from ibpred.run.storage.store import Store
from ibpred.run.values.evaluate import evaluate
from ibpred.run.values.expansions import Approach, expand

FAMILIES = Path(__file__).parents[2] / "families"
F = Fraction


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    return tmp_path_factory.mktemp("store")


def chain_of(name, store):
    return Chain(read_family_file(FAMILIES / f"{name}.toml"), store, SILENT, 1)


def test_leading_logarithms_of_the_massless_box(folder):
    # s t I = 4/eps^2 - 2/eps log x - 4 pi^2/3 + O(eps) at s = -1, t = -x: exact in x to this order
    with Store(folder / "massless-box") as store:
        (box,) = expand(
            chain_of("massless-box", store), {"s": F(-1)}, Approach("t", F(0), -1), ((1, 1, 1, 1),), 0, 4, 25
        )
    assert {order: set(terms) for order, terms in box.epsilon.items()} == {
        -2: {(-1, 0)},
        -1: {(-1, 1)},
        0: {(-1, 0)},
    }
    assert float(box.epsilon[-2][-1, 0].re) == pytest.approx(4, rel=1e-15)
    assert float(box.epsilon[-1][-1, 1].re) == pytest.approx(-2, rel=1e-15)
    assert float(box.epsilon[0][-1, 0].re) == pytest.approx(-4 * math.pi**2 / 3, rel=1e-15)


@pytest.mark.parametrize(
    ("name", "fixed", "approach"),
    [
        ("massless-box", {"s": 2}, ("t", 0, -1)),
        ("massless-box", {"s": 2}, ("t", -2, 1)),
        ("massless-box", {"s": 2}, ("t", -2, -1)),
        ("massless-box", {"s": -3}, ("t", F(5, 7), 1)),
        ("massless-box", {"t": F(-2, 3)}, ("s", 0, 1)),
        ("bubble-one-mass", {"m2": 2}, ("s", 2, 1)),
        ("bubble-one-mass", {"s": -1}, ("m2", 0, 1)),
        ("box-one-leg", {"s": 2, "p4sq": F(1, 3)}, ("t", 0, 1)),
        ("box-one-leg", {"s": 2, "t": F(-1, 3)}, ("p4sq", 0, 1)),
        ("box-one-leg", {"s": 2, "t": F(-1, 3)}, ("p4sq", 2, -1)),
    ],
)
def test_expansions_sum_to_values(name, fixed, approach, folder):
    variable, place, side = approach
    exact = {key: F(value) for key, value in fixed.items()}
    h, highest = F(1, 1000), 7
    with Store(folder / name) as store, mp.workdps(40):
        chain = chain_of(name, store)
        expansions = expand(chain, exact, Approach(variable, F(place), side), (), 1, highest, 30)
        point = {**exact, variable: F(place) + side * h}
        x = mpf(h.numerator) / h.denominator
        for expansion, value in zip(expansions, evaluate(chain, point, (), 1, 30), strict=True):
            assert expansion.powers == value.powers
            for order, ball in value.epsilon.items():
                terms = expansion.epsilon.get(order, {})
                total = sum((mpc(c.re, c.im) * x**a * mplog(x) ** b for (a, b), c in terms.items()), mpc(0))
                assert abs(total - mpc(ball.re, ball.im)) < 1e-19


@pytest.mark.parametrize("side", [1, -1])
def test_square_roots_of_the_distance(side, folder):
    name, highest, h = "bubble-two-masses", 7, F(1, 1000)
    with Store(folder / name) as store, mp.workdps(40):
        chain = chain_of(name, store)
        expansion = expand(chain, {"m2": F(1)}, Approach("s", F(4), side), ((1, 1),), 1, highest, 30)[0]
        value = evaluate(chain, {"s": 4 + side * h, "m2": F(1)}, ((1, 1),), 1, 30)[0]
        x = mpf(h.numerator) / h.denominator
        for order, ball in value.epsilon.items():
            total = sum(
                mpc(c.re, c.im) * x ** (mpf(a.numerator) / a.denominator) * mplog(x) ** b
                for (a, b), c in expansion.epsilon[order].items()
            )
            assert abs(total - mpc(ball.re, ball.im)) < 1e-21
        # eps^0 at s = 4 - h: 2 - 2 sqrt((4-s)/s) atan(sqrt(s/(4-s))) = 2 - pi/2 sqrt(h) + ...
        # and above sqrt(-h - i0)
        root = expansion.epsilon[0][F(1, 2), 0]
        expected = -mp.pi / 2 * (1 if side < 0 else mpc(0, -1))
        assert abs(mpc(root.re, root.im) - expected) < 1e-25


def test_what_cannot_be_approached(folder):
    with Store(folder / "massless-box") as store:
        chain = chain_of("massless-box", store)
        with pytest.raises(PointError, match="cannot be approached"):
            expand(chain, {"t": F(1)}, Approach("u", F(0), 1), (), 0, 2, 10)
        with pytest.raises(PointError, match="given twice"):
            expand(chain, {"s": F(1), "t": F(1)}, Approach("t", F(0), 1), (), 0, 2, 10)
        with pytest.raises(PointError, match="lacks a value for s"):
            expand(chain, {}, Approach("t", F(0), 1), (), 0, 2, 10)


def test_laurent_coefficients_of_entries():
    field = ring(("eps", "h"))
    entry = parse_rational("(1+eps*h)/(eps^2*h*(1-2*eps)*(1+h))", field)
    found = entry_terms(entry, 0, 1)
    eps, h = F(1, 10**6), F(1, 10**4)
    total = sum(c * eps**a * h**b for (a, b), c in found.items())
    exact = (1 + eps * h) / (eps**2 * h * (1 - 2 * eps) * (1 + h))
    # the first powers left out are eps^1/h and eps^-2 h^2
    assert abs(total - exact) < 10 * (eps / h + h**2 / eps**2)
    assert found[-2, -1] == 1
    assert found[-1, -1] == 2
    assert found[-1, 0] == -2 + 1
