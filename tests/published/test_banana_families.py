"""Sunrise and bananas of equal masses, from the file to digits, against Bessel moments (m^2 = 1)."""

from __future__ import annotations

from fractions import Fraction

import bessel_bananas as bessel
import pytest
from mpmath import mp, mpf
from solving import FAMILIES, compare, values

from ibpred.family.reading import read_family
from ibpred.progress import SILENT
from ibpred.run.chain import Chain
from ibpred.run.store import Store

DIGITS = 30


@pytest.fixture(autouse=True)
def _digits():
    with mp.workdps(45):
        yield


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    return tmp_path_factory.mktemp("store")


def values_in_two_dimensions(name, folder, s, order, wanted):
    """As `solving.values`, the shipped file with d = 2 - 2 eps put at its head."""
    path = FAMILIES / f"{name}.toml"
    family = read_family("dimension = 2\n" + path.read_text(), path.name, name)
    point = {"s": Fraction(s), "m2": Fraction(1)}
    with Store(folder / f"{name}-two-dimensions") as store:
        found = Chain(family, store, SILENT, 1).evaluate(point, wanted, order, DIGITS)
    return {value.powers: value for value in found}


def moments(dimension, powers, s, orders):
    count = sum(1 for power in powers if power)
    exact = Fraction(s)
    with mp.workdps(45):
        at = mpf(exact.numerator) / exact.denominator
        return bessel.coefficients(dimension, powers[:count], (1,) * count, at, orders, DIGITS + 6)


SUNRISE = (1, 1, 1, 0, 0)
DOTTED = (2, 1, 1, 0, 0)

# Euclidean, below the pseudo-threshold s = 1, between it and the threshold s = 9, above
POINTS = ["-3", "1/2", "4", "11"]


@pytest.mark.parametrize("s", ["-1", *(pytest.param(s, marks=pytest.mark.slow) for s in POINTS)])
def test_sunrise_in_two_dimensions(s, folder):
    found = values_in_two_dimensions("sunrise-equal-masses", folder, s, 1, (SUNRISE,))
    compare(found[SUNRISE], moments(2, SUNRISE, s, (0, 1)), DIGITS)


@pytest.mark.slow
@pytest.mark.parametrize("s", POINTS)
def test_sunrise_in_four_dimensions(s, folder):
    """With a dot as well: the elliptic curve's second period."""
    name = "sunrise-equal-masses"
    found = values(name, folder / name, {"s": s, "m2": "1"}, 1, DIGITS, [SUNRISE, DOTTED])
    compare(found[SUNRISE], moments(4, SUNRISE, s, (-2, 1)), DIGITS)
    compare(found[DOTTED], moments(4, DOTTED, s, (-2, 1)), DIGITS)


@pytest.mark.slow
@pytest.mark.parametrize("s", ["-1", "2", "20"])
def test_three_loops_in_two_dimensions(s, folder):
    """Between the pseudo-thresholds 0, 4 and the threshold 16, and above."""
    banana = (1,) * 4 + (0,) * 5
    found = values_in_two_dimensions("banana-three-loop", folder, s, 0, (banana,))
    compare(found[banana], moments(2, banana, s, (0, 0)), DIGITS)
