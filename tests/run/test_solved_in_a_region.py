"""Families solved in a region of scattering that the family file asks for."""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path

import pytest

from ibpred.balls.decimal import ball_of_decimal
from ibpred.boundary.conditions.fix import fix_constants
from ibpred.family.reading import read_family
from ibpred.numerics.value import Route
from ibpred.progress import SILENT
from ibpred.run.chain.chain import Chain
from ibpred.run.constants.solved import solution
from ibpred.run.storage.store import Store
from ibpred.run.values.evaluate import evaluate

FAMILIES = Path(__file__).parents[2] / "families"


def definition(name, region):
    text = (FAMILIES / f"{name}.toml").read_text(encoding="utf-8")
    return read_family(text.replace("[kinematics]\n", f"[kinematics]\nregion = {region}\n"), "f.toml", name)


@pytest.mark.parametrize("name", ["massless-box", pytest.param("planar-double-box", marks=pytest.mark.slow)])
def test_two_ways_to_the_constants(name, tmp_path):
    """Half turns of the Euclidean ones; closed forms, exponents and regularity in the region itself."""
    with Store(tmp_path / "store") as store:
        here = Chain(definition(name, '["s > 0"]'), store, SILENT, 1)
        weight = 2 * len(here.definition.loops)
        by_turns = here.boundary(weight)
        by_conditions = fix_constants(here.boundary_problem(here.solved_form(), weight))
    assert by_turns.start == by_conditions.start
    assert by_turns.constants == by_conditions.constants


def test_two_ratios(tmp_path):
    """s > 0, t < 0, p4sq < 0: inside the region, and outside it, where the Euclidean one takes over."""
    points = [("1", "-1/9", "-1/20"), ("1", "-1/9", "1/20"), ("1", "-5", "-3")]
    with Store(tmp_path / "store") as store:
        here = Chain(definition("box-one-leg", '["s > 0"]'), store, SILENT, 1)
        usual = Chain(definition("box-one-leg", "[]"), store, SILENT, 1)
        for s, t, p4sq in points:
            point = {"s": Fraction(s), "t": Fraction(t), "p4sq": Fraction(p4sq)}
            compare(evaluate(here, point, (), 0, 20), evaluate(usual, point, (), 0, 20))


def compare(values, expected):
    for value, other in zip(values, expected, strict=True):
        assert value.certified
        assert value.route is Route.EPSILON_FORM
        assert set(value.epsilon) == set(other.epsilon)
        for k, ball in value.epsilon.items():
            assert ball_of_decimal(ball, 200).overlaps(ball_of_decimal(other.epsilon[k], 200))


@pytest.mark.parametrize("name", ["massless-box", pytest.param("planar-double-box", marks=pytest.mark.slow)])
def test_all_constants_are_derived_and_agree_with_the_euclidean_ones(name, tmp_path):
    """The region s > 0, t < 0, -t < s; the others are reached by i0 from the Euclidean one."""
    inside, outside = ("1", "-2/5"), [("-1", "-1/3"), ("1", "-3"), ("-2", "1/2")]
    with Store(tmp_path / "store") as store:
        here = Chain(definition(name, '["s > 0"]'), store, SILENT, 1)
        usual = Chain(definition(name, "[]"), store, SILENT, 1)
        solved = solution(here, 2 * len(here.definition.loops))
        assert solved.is_pure()
        assert not here.is_euclidean()
        assert not here.boundary(2).fitted
        for s, t in [inside, *outside]:
            point = {"s": Fraction(s), "t": Fraction(t)}
            compare(evaluate(here, point, (), 0, 20), evaluate(usual, point, (), 0, 20))
