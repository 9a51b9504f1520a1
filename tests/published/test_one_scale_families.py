"""Massless families of one scale at two and three loops, from the file to digits."""

from __future__ import annotations

from fractions import Fraction

import massless_references as massless
import pytest
from bessel_bananas import small_circle
from mpmath import mp, mpc, mpf, zeta
from solving import FAMILIES, compare, values

from ibpred.numerics.direct import direct_value
from ibpred.run.storage.files import read_family_file

DIGITS = 30
EUCLIDEAN = {"s": "-1"}


@pytest.fixture(autouse=True)
def _digits():
    with mp.workdps(45):
        yield


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    return tmp_path_factory.mktemp("store")


def expanded(function, lowest):
    # three loops have poles at eps = 1/3 and nearer: too near for the larger circle of `closed_forms`
    return small_circle(function, lowest, 0, 38, True)


def complex_values(table):
    return {order: mpc(value) for order, value in table.items()}


def direct(name, powers, samples):
    family = read_family_file(FAMILIES / f"{name}.toml")
    return direct_value(family, powers, {"s": Fraction(-1)}, order=0, seed=11, samples=samples)


def close_to_direct(expected, found, relative):
    """Published coefficients against direct integration: within six errors, which are small."""
    size = max(abs(value) for value in expected.values())
    assert set(found) <= set(expected)
    for order, (number, error) in found.items():
        assert abs(number - expected[order]) < 6 * error + mpf(10) ** -9 * size, (order, number, error)
        assert error < relative * size


class TestAgainstDirectIntegration:
    """What stands in `massless_references` from memory, by an integration that shares nothing with it."""

    def test_kite_with_a_bubble(self):
        found = direct("propagator-benz", (1, 1, 1, 1, 0, 1, 1, 0, 0), 10_000)
        close_to_direct(massless.kite_with_a_bubble(), found, 1e-3)

    @pytest.mark.slow
    def test_crossed_vertex(self):
        found = direct("crossed-vertex", (1, 1, 1, 1, 1, 1, 0), 40_000)
        close_to_direct(massless.crossed_vertex(), found, 1e-3)

    @pytest.mark.slow
    @pytest.mark.parametrize("name", ["propagator-planar-ladder", "propagator-non-planar"])
    def test_twenty_zeta_five(self, name):
        found = direct(name, (1,) * 8 + (0,), 20_000)
        close_to_direct(massless.finite_three_loop_propagators(), found, 1e-3)


def test_crossed_vertex(folder):
    found = values("crossed-vertex", folder / "crossed", EUCLIDEAN, 0, DIGITS)
    compare(found[1, 1, 1, 1, 1, 1, 0], complex_values(massless.crossed_vertex()), DIGITS)
    compare(found[0, 1, 1, 1, 0, 1, 0], expanded(massless.triangle_with_bubble, -2), DIGITS)
    compare(found[0, 0, 1, 1, 1, 0, 0], expanded(massless.vertex_sunrise, -1), DIGITS)


@pytest.mark.slow
@pytest.mark.parametrize("name", ["propagator-planar-ladder", "propagator-benz", "propagator-non-planar"])
def test_three_loop_propagators(name, folder):
    """All masters: each is one of the six that are published (Chetyrkin, Tkachov; Baikov, Chetyrkin)."""
    references = {
        4: [expanded(massless.three_loop_sunrise, -1)],
        5: [expanded(massless.bubble_times_sunrise, -2), expanded(massless.two_bubbles_in_a_loop, -2)],
        6: [expanded(massless.three_bubbles, -3), complex_values(massless.kite_with_a_bubble())],
        8: [complex_values(massless.finite_three_loop_propagators())],
    }
    for powers, value in values(name, folder / name, EUCLIDEAN, 0, DIGITS).items():
        lowest = min(value.epsilon)
        leading = mpf(value.epsilon[lowest].re)
        (expected,) = [
            table
            for table in references[sum(powers)]
            if min(table) == lowest and abs(table[lowest] - leading) < mpf(1) / 100
        ]
        compare(value, expected, DIGITS)


@pytest.mark.slow
def test_planar_ladder(folder):
    name = "propagator-planar-ladder"
    ladder = (1,) * 8 + (0,)
    (value,) = values(name, folder / name, EUCLIDEAN, 0, DIGITS, [ladder]).values()
    compare(value, complex_values(massless.finite_three_loop_propagators()), DIGITS)


@pytest.mark.slow
def test_benz_pole(folder):
    """Six soft lines leave two with the momentum p: a logarithm with the period 6 zeta(3) of the tetrahedron.

    Soft momenta of size r: ``6 zeta(3) 2 r^(-6 eps) dr/r``, up to r ~ 1, is ``-2 zeta(3)/eps``.
    """
    name = "propagator-benz"
    benz = (1,) * 8 + (0,)
    (value,) = values(name, folder / name, EUCLIDEAN, 0, DIGITS, [benz]).values()
    assert min(value.epsilon) == -1
    assert abs(mpf(value.epsilon[-1].re) + 2 * zeta(3)) < mpf(10) ** -DIGITS
    found = direct(name, benz, 20_000)
    close_to_direct({order: mpf(ball.re) for order, ball in value.epsilon.items()}, found, 1e-2)
