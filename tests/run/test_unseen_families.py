"""Families that are not shipped: other routings, orders of lines, names and units go through as well."""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path

import pytest
from mpmath import mpf

from ibpred.family.reading import read_family
from ibpred.numerics.value import Value
from ibpred.progress import SILENT
from ibpred.run.chain.chain import Chain
from ibpred.run.storage.files import read_family_file
from ibpred.run.storage.store import Store
from ibpred.run.values.evaluate import evaluate

FAMILIES = Path(__file__).parents[2] / "families"

BOX = """
title = "The box in another dress"
[momenta]
loop = ["q"]
external = ["a", "b", "c"]
[kinematics]
invariants = { S = 2, T = 2 }
equations = ["a*a = 0", "b^2 = 0", "c^2 = 0", "2*a*b = S", "(b+c)^2 = T", "2*a*c = -S-T"]
unit = "T"
[[line]]
momentum = "q-a-b"
[[line]]
momentum = "q+c"
[[line]]
momentum = "q"
[[line]]
momentum = "-q+b"
"""

DOUBLE_BOX = """
title = "The planar double box in another dress"
[momenta]
loop = ["l1", "l2"]
external = ["q2", "q1", "q4"]
[kinematics]
invariants = { tt = 2, ss = 2 }
equations = ["q1^2 = 0", "q2^2 = 0", "q4^2 = 0", "(q1+q2)^2 = ss", "(q1+q4)^2 = tt", "(q1+q2+q4)^2 = 0"]
unit = "ss"
[[line]]
momentum = "l1+l2"
[[line]]
momentum = "l2-q1-q2"
[[line]]
momentum = "l1+q1"
[[line]]
momentum = "l2"
[[line]]
momentum = "l1"
[[line]]
momentum = "l1+q1+q2"
[[line]]
momentum = "l2+q4"
"""

VERTEX = """
title = "Two-loop planar vertex with two off-shell legs"
[momenta]
loop = ["k", "l"]
external = ["p", "r"]
[kinematics]
invariants = { M = 2, Q = 2 }
equations = ["p^2 = M", "r^2 = 0", "(p+r)^2 = Q"]
[[line]]
momentum = "k"
[[line]]
momentum = "k+p"
[[line]]
momentum = "k-l"
[[line]]
momentum = "l"
[[line]]
momentum = "l+p"
[[line]]
momentum = "l+p+r"
"""


def value_of(text: str, folder: Path, point: dict[str, str], powers: tuple[int, ...], order: int) -> Value:
    definition = read_family(text, "given.toml", "given")
    exact = {name: Fraction(value) for name, value in point.items()}
    with Store(folder) as store:
        (value,) = evaluate(Chain(definition, store, SILENT, 1), exact, (powers,), order, 30)
    return value


def shipped(name: str, folder: Path, point: dict[str, str], powers: tuple[int, ...], order: int) -> Value:
    definition = read_family_file(FAMILIES / f"{name}.toml")
    exact = {symbol: Fraction(value) for symbol, value in point.items()}
    with Store(folder) as store:
        (value,) = evaluate(Chain(definition, store, SILENT, 1), exact, (powers,), order, 30)
    return value


def agree(left: Value, right: Value) -> None:
    assert left.certified
    assert right.certified
    assert set(left.epsilon) == set(right.epsilon)
    for order, ball in left.epsilon.items():
        other = right.epsilon[order]
        error = mpf(ball.radius) + mpf(other.radius)
        assert abs(mpf(ball.re) - mpf(other.re)) <= error
        assert abs(mpf(ball.im) - mpf(other.im)) <= error


@pytest.mark.parametrize(("s", "t"), [("-1", "-1/3"), ("1", "-1/3"), ("-2", "5")])
def test_box(tmp_path: Path, s: str, t: str) -> None:
    mine = value_of(BOX, tmp_path / "a", {"S": s, "T": t}, (1, 1, 1, 1), 2)
    theirs = shipped("massless-box", tmp_path / "b", {"s": s, "t": t}, (1, 1, 1, 1), 2)
    agree(mine, theirs)


@pytest.mark.parametrize(("s", "t"), [("-1", "-1/3"), ("1", "-1/3")])
def test_double_box(tmp_path: Path, s: str, t: str) -> None:
    powers = (1, 1, 1, 1, 1, 1, 1, 0, 0)
    mine = value_of(DOUBLE_BOX, tmp_path / "a", {"ss": s, "tt": t}, powers, 0)
    agree(mine, shipped("planar-double-box", tmp_path / "b", {"s": s, "t": t}, powers, 0))


def test_vertex_with_two_legs(tmp_path: Path) -> None:
    """At a small mass the form factor's top integral shows its logarithm; here: the chain goes through.

    The value is checked by direct integration of the parametric representation in
    `test_against_direct_integration`.
    """
    value = value_of(VERTEX, tmp_path, {"M": "-1/3", "Q": "-1"}, (1, 1, 1, 1, 1, 1, 0), 0)
    assert value.certified


@pytest.mark.slow
def test_against_direct_integration(tmp_path: Path) -> None:
    from ibpred.numerics.direct import direct_value

    definition = read_family(VERTEX, "given.toml", "given")
    powers = (1, 1, 1, 1, 1, 1, 0)
    value = value_of(VERTEX, tmp_path, {"M": "-1/3", "Q": "-1"}, powers, 0)
    point = {"M": Fraction(-1, 3), "Q": Fraction(-1)}
    direct = direct_value(definition, powers, point, order=0, seed=1, samples=50_000)
    for order, (number, error) in direct.items():
        exact = float(value.epsilon[order].re) if order in value.epsilon else 0.0
        assert abs(number - exact) < 6 * error + 1e-9 * abs(exact)
