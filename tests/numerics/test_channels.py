"""Regions of real kinematics that have boundary constants of their own."""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path

import pytest

from ibpred.balls.decimal import ball_of_decimal
from ibpred.errors import PointError, UnfinishedError
from ibpred.numerics.forms.channels import Channel, channel_of, scattering_point
from ibpred.numerics.forms.path import Target
from ibpred.numerics.value import Route
from ibpred.progress import SILENT
from ibpred.run.chain.chain import Chain
from ibpred.run.storage.files import read_family_file
from ibpred.run.storage.store import Store
from ibpred.run.values.evaluate import evaluate

FAMILY = Path(__file__).parents[2] / "families" / "massless-box.toml"
F = Fraction
ROOTS = (F(0), F(1))
SIGNS = {"s": 1, "t": -1}


@pytest.mark.parametrize(
    ("ratio", "unit", "channel"),
    [
        (F(1, 3), 0, Channel(0, F(0), F(1))),
        (F(3), 0, Channel(0, F(1), None)),
        (F(-2), -1, Channel(-1, None, F(0))),
    ],
)
def test_regions_of_one_ratio(ratio, unit, channel):
    assert channel_of(ratio, unit, ROOTS) == channel
    inside = channel.ratio()
    assert channel_of(inside, unit, ROOTS) == channel
    assert channel.target(inside).value == inside
    assert channel.is_base() == (ratio == F(1, 3))


def test_letters_that_are_not_linear_are_told():
    with pytest.raises(UnfinishedError, match="not linear"):
        channel_of(F(1, 3), 0, (F(0), None))


def test_points_are_read_with_signs():
    sizes = {"s": 2, "t": 2}
    point = scattering_point({"s": F(-2), "t": F(-1)}, SIGNS, "s", sizes, ())
    assert point.unit == Target(F(2), -1)
    assert point.ratios == {"t": Target(F(1, 2), 1)}
    assert scattering_point({"s": F(2), "t": F(-1)}, SIGNS, "s", sizes, ()).ratios["t"].value == F(1, 2)
    with pytest.raises(PointError, match="singular"):
        scattering_point({"s": F(2), "t": F(0)}, SIGNS, "s", sizes, ())


class WithoutEuclideanRegion(Chain):
    """A chain that knows of no Euclidean region, although its family has one."""

    def signs(self):
        return SIGNS

    def is_euclidean(self):
        return False


@pytest.fixture(scope="module")
def chains(tmp_path_factory):
    folder = tmp_path_factory.mktemp("stores")
    family = read_family_file(FAMILY)
    with Store(folder / "one") as one, Store(folder / "other") as other:
        yield Chain(family, one, SILENT, 1), WithoutEuclideanRegion(family, other, SILENT, 1)


@pytest.mark.parametrize(
    ("s", "t", "derived"),
    [("1", "-2/7", True), ("-1", "-3/5", False), pytest.param("-1", "5/2", False, marks=pytest.mark.slow)],
)
def test_every_region_as_by_i0_from_the_euclidean_one(chains, s, t, derived):
    """Constants of each region, fitted outside that of the solution, against exact ones, continued."""
    usual, blind = chains
    point = {"s": F(s), "t": F(t)}
    for expected, value in zip(
        evaluate(usual, point, (), 1, 20), evaluate(blind, point, (), 1, 20), strict=True
    ):
        assert expected.certified
        assert value.certified == derived
        assert value.route is Route.EPSILON_FORM
        for power in set(expected.epsilon) | set(value.epsilon):
            left, right = (ball_of_decimal(v.epsilon[power], 200) for v in (expected, value))
            assert left.overlaps(right)


class OffShellScattering(WithoutEuclideanRegion):
    """Two ratios, s > 0 and the others negative."""

    def signs(self):
        return {"s": 1, "t": -1, "p4sq": -1}


@pytest.mark.slow
def test_the_region_at_the_corner_of_two_ratios(tmp_path):
    """x = -t/s and y = -p4sq/s, u = p4sq - s - t < 0 for small ones."""
    family = read_family_file(FAMILY.with_name("box-one-leg.toml"))
    inside = {"s": F(2), "t": F(-1, 3), "p4sq": F(-1, 7)}
    with Store(tmp_path / "one") as one, Store(tmp_path / "other") as other:
        usual, blind = Chain(family, one, SILENT, 1), OffShellScattering(family, other, SILENT, 1)
        expected, found = (evaluate(chain, inside, (), 0, 20) for chain in (usual, blind))
    for left, right in zip(expected, found, strict=True):
        assert right.route is Route.EPSILON_FORM
        for power in set(left.epsilon) | set(right.epsilon):
            one_ball, other_ball = (ball_of_decimal(v.epsilon[power], 200) for v in (left, right))
            assert one_ball.overlaps(other_ball)
