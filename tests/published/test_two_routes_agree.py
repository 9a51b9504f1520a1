"""The auxiliary mass against the shipped values of solved epsilon-forms: double boxes, physical points.

The routes share the reduction only: one has regularity conditions, words and polylogarithms, at symbolic
kinematics; the other regions at infinite mass, series at numeric kinematics and numeric eps. (Some constants
of the crossed double box were fitted to auxiliary-mass values, so there only the continuation is new.)
"""

from __future__ import annotations

import json
from fractions import Fraction

import pytest
from mpmath import mp, mpc, mpf
from solving import FAMILIES

from ibpred.exact.primes import first_primes
from ibpred.numerics.auxiliary.build import auxiliary_plan
from ibpred.numerics.auxiliary.laurent import auxiliary_values
from ibpred.numerics.value import Value
from ibpred.run.storage.files import read_family_file

PRIMES = first_primes(40)
DIGITS = 20
TOP = (1,) * 7 + (0, 0)

Epsilon = dict[int, dict[str, str]]


def by_auxiliary_mass(name: str, point: dict[str, str], wanted: list[tuple[int, ...]]) -> tuple[Value, ...]:
    family = read_family_file(FAMILIES / f"{name}.toml")
    exact = {key: Fraction(text) for key, text in point.items()}
    return auxiliary_values(auxiliary_plan(family, exact, wanted, PRIMES, 1), 0, DIGITS)


def shipped(name: str, place: int) -> tuple[dict[str, str], dict[tuple[int, ...], Epsilon]]:
    """A point of a solved family and the values there."""
    text = (FAMILIES.parent / "solutions" / name / "values.json").read_text()
    table = json.loads(text)["tables"][place]
    values = {}
    for integral in table["integrals"]:
        assert integral["route"] == "epsilon-form"
        epsilon = {int(order): ball for order, ball in integral["epsilon"].items()}
        values[tuple(integral["powers"])] = epsilon
    return table["point"], values


PHYSICAL = (
    "box-massive-fermion",
    "box-massive-loop",
    "box-one-leg",
    "box-three-legs",
    "box-two-adjacent-legs",
    "box-two-opposite-legs",
    "bubble-distinct-masses",
    "bubble-two-masses",
    "kite-massive",
    "massless-box",
    "pentagon",
    "post-minkowskian-box",
    "static-quark-cusp",
    "sunrise-two-masses",
    "triangle-massive-loop",
    "triangle-three-legs",
    "vertex-massive-fermion",
)


@pytest.mark.slow
@pytest.mark.parametrize(
    ("name", "place"),
    [
        ("planar-double-box", 0),
        ("planar-double-box", 1),
        ("planar-double-box-one-leg", 0),
        ("planar-double-box-one-leg", 1),
        ("crossed-double-box", 1),
        *((name, 1) for name in PHYSICAL),
    ],
)
def test_auxiliary_mass_and_epsilon_form_agree(name: str, place: int) -> None:
    point, values = shipped(name, place)
    most = max(sum(power > 0 for power in powers) for powers in values)
    wanted = [powers for powers in values if sum(power > 0 for power in powers) >= most - 1]
    with mp.workdps(40):
        for value in by_auxiliary_mass(name, point, wanted):
            expected = values[value.powers]
            size = max(abs(mpc(ball["re"], ball["im"])) for ball in expected.values())
            for order in sorted({*expected, *value.epsilon}):
                known = mpc(0), mpf(0)
                if order in expected:
                    ball = expected[order]
                    known = mpc(ball["re"], ball["im"]), mpf(ball["radius"])
                if order not in value.epsilon:
                    assert abs(known[0]) <= mpf(10) ** -DIGITS * size
                    continue
                found = value.epsilon[order]
                error = abs(mpc(found.re, found.im) - known[0])
                assert error <= 2 * (mpf(found.radius) + known[1]), (value.powers, order)
                assert error <= mpf(10) ** -DIGITS * size


def test_leading_pole_and_symmetry_of_the_crossed_double_box() -> None:
    """The scalar integral is the same with t and u exchanged: so it is at t = -s/3 and -2 s/3.

    J.B. Tausk, hep-ph/9909506: 2/(s^2 t) + 2/(s^2 u) over eps^4 (from memory).
    """
    (first_point, first), (second_point, second) = (shipped("crossed-double-box", place) for place in (0, 1))
    s, t = (Fraction(first_point[name]) for name in ("s", "t"))
    assert Fraction(second_point["t"]) == -s - t
    assert Fraction(first[TOP][-4]["re"]) == 2 / (s**2 * t) + 2 / (s**2 * (-s - t))
    with mp.workdps(40):
        for order in range(-4, 1):
            one, two = (mpc(table[TOP][order]["re"], table[TOP][order]["im"]) for table in (first, second))
            assert abs(one - two) <= mpf(10) ** -28 * abs(one)
