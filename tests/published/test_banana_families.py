"""Sunrise and bananas of equal masses, from the file to digits, against Bessel moments (m^2 = 1)."""

from __future__ import annotations

from fractions import Fraction

import bessel_bananas as bessel
import dispersive_bananas as dispersive
import pytest
from mpmath import mp, mpf
from solving import FAMILIES, compare, values

from ibpred.errors import PointError
from ibpred.family.reading import read_family
from ibpred.numerics.value import Route
from ibpred.progress import SILENT
from ibpred.run.chain.chain import Chain
from ibpred.run.storage.files import read_family_file
from ibpred.run.storage.store import Store
from ibpred.run.values.evaluate import evaluate
from ibpred.run.values.expansions import Approach, expand

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
        found = evaluate(Chain(family, store, SILENT, 1), point, wanted, order, DIGITS)
    return {value.powers: value for value in found}


def moments(dimension, powers, s, orders):
    count = sum(1 for power in powers if power)
    exact = Fraction(s)
    with mp.workdps(45):
        at = mpf(exact.numerator) / exact.denominator
        return bessel.coefficients(dimension, powers[:count], (1,) * count, at, orders, DIGITS + 6)


SUNRISE = (1, 1, 1, 0, 0)
DOTTED = (2, 1, 1, 0, 0)

# Euclidean, at zero momentum, below the pseudo-threshold s = 1, at it, below the threshold s = 9, above it
POINTS = ["-3", "0", "1/2", "1", "4", "11"]


def check_certified(value, s):
    """All but the limits at pseudo-thresholds beyond all positive terms of F are rigorous."""
    assert value.certified
    assert (value.route is Route.LIMIT) == (s in ("0", "1"))


@pytest.mark.parametrize(
    "s", ["-1", "0", *(pytest.param(s, marks=pytest.mark.slow) for s in POINTS if s != "0")]
)
def test_sunrise_in_two_dimensions(s, folder):
    found = values_in_two_dimensions("sunrise-equal-masses", folder, s, 1, (SUNRISE,))
    compare(found[SUNRISE], moments(2, SUNRISE, s, (0, 1)), DIGITS)
    check_certified(found[SUNRISE], s)


@pytest.mark.slow
@pytest.mark.parametrize("s", POINTS)
def test_sunrise_in_four_dimensions(s, folder):
    """With a dot as well: the elliptic curve's second period."""
    name = "sunrise-equal-masses"
    found = values(name, folder / name, {"s": s, "m2": "1"}, 1, DIGITS, [SUNRISE, DOTTED])
    compare(found[SUNRISE], moments(4, SUNRISE, s, (-2, 1)), DIGITS)
    compare(found[DOTTED], moments(4, DOTTED, s, (-2, 1)), DIGITS)
    check_certified(found[SUNRISE], s)


def test_sunrise_on_the_mass_shell(folder):
    """``-(3/(2 eps^2) + 17/(4 eps) + 59/8 + pi^2/4)`` at s = m^2 = 1.

    Gray, Broadhurst, Grafe, Schilcher, Z. Phys. C48 (1990) 673; from memory.
    """
    name = "sunrise-equal-masses"
    found = values(name, folder / name, {"s": "1", "m2": "1"}, 0, DIGITS, [SUNRISE])
    expected = {-2: -mpf(3) / 2, -1: -mpf(17) / 4, 0: -mpf(59) / 8 - mp.pi**2 / 4}
    compare(found[SUNRISE], {k: mp.mpc(v) for k, v in expected.items()}, DIGITS)


@pytest.mark.slow
def test_sunrise_at_threshold(folder):
    """At s = 9 the dispersion integral for what is left beyond the linear terms at s = 0."""
    name = "sunrise-equal-masses"
    found = values(name, folder / name, {"s": "9", "m2": "1"}, 0, 20, [SUNRISE])[SUNRISE]
    assert not found.certified
    with Store(folder / name) as store:
        chain = Chain(read_family_file(FAMILIES / f"{name}.toml"), store, SILENT, 1)
        near = expand(chain, {"m2": Fraction(1)}, Approach("s", Fraction(0), 1), (SUNRISE,), 0, 1, 20)[0]
    start, slope = (mpf(near.epsilon[0][Fraction(n), 0].re) for n in (0, 1))
    with mp.workdps(15):
        rest = dispersive.four_dimensional_rest(mpf(9))
    assert abs(mpf(found.epsilon[0].re) - start - 9 * slope - rest) < mpf(10) ** -12


def test_no_limit_at_threshold_in_two_dimensions(folder):
    with pytest.raises(PointError, match=r"no limit at the singular point s = 9.* log\(h\) at eps\^0"):
        values_in_two_dimensions("sunrise-equal-masses", folder, "9", 0, (SUNRISE,))


@pytest.mark.slow
@pytest.mark.parametrize("s", ["-1", "0", "2", "4", "20"])
def test_three_loops_in_two_dimensions(s, folder):
    """At and between the pseudo-thresholds 0, 4 and the threshold 16, and above."""
    banana = (1,) * 4 + (0,) * 5
    found = values_in_two_dimensions("banana-three-loop", folder, s, 0, (banana,))
    compare(found[banana], moments(2, banana, s, (0, 0)), DIGITS)


@pytest.mark.slow
def test_three_loops_in_four_dimensions_above_threshold(folder):
    s, banana = "20", (1,) * 4 + (0,) * 5
    found = values("banana-three-loop", folder / "three", {"s": s, "m2": "1"}, 0, DIGITS, [banana])
    compare(found[banana], moments(4, banana, s, (-3, 0)), DIGITS)
    assert found[banana].certified


@pytest.mark.slow
def test_four_loops_in_four_dimensions_above_threshold(folder):
    s, banana = "30", (1,) * 5 + (0,) * 9
    found = values("banana-four-loop", folder / "four", {"s": s, "m2": "1"}, 0, DIGITS, [banana])
    compare(found[banana], moments(4, banana, s, (-4, 0)), DIGITS)
    assert found[banana].certified
