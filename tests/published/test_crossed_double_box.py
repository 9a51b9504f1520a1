"""The crossed massless double box: no Euclidean region, constants in each region of real kinematics.

Published: J. B. Tausk, hep-ph/9909506 (structure and leading pole, from memory); R. J. Gonsalves, Phys. Rev.
D 28 (1983) 1542, and G. Kramer, B. Lampe, J. Math. Phys. 28 (1987) 945 (the crossed vertex, from memory).
"""

from __future__ import annotations

import json
from fractions import Fraction
from pathlib import Path

import flint
import pytest

from ibpred.balls.context import precision
from ibpred.balls.decimal import DecimalBall, ball_of_decimal
from ibpred.exact.grammar import parse_rational
from ibpred.exact.rational import ring
from ibpred.iterated.constants.constants import Constant, sum_of
from ibpred.iterated.constants.series import laurent
from ibpred.iterated.polylogs.polylog_values import Place, polylogs
from ibpred.progress import SILENT
from ibpred.run.chain.chain import Chain
from ibpred.run.constants.known_points import auxiliary_at
from ibpred.run.storage.files import read_family_file
from ibpred.run.storage.store import Store

ROOT = Path(__file__).parents[2]
FOLDER = ROOT / "solutions" / "crossed-double-box"
BITS = 200
PI, ZETA3 = Constant.generator("pi"), Constant.generator("zeta3")


def document(name):
    return json.loads((FOLDER / f"{name}.json").read_text(encoding="utf-8"))


def shipped_values():
    """For each table the point and, for each master, power of eps -> ball."""
    found = []
    for table in document("values")["tables"]:
        point = {name: Fraction(text) for name, text in table["point"].items()}
        masters = [
            {
                int(k): ball_of_decimal(DecimalBall(part["re"], part["im"], part["radius"]), BITS)
                for k, part in value["epsilon"].items()
            }
            for value in table["integrals"]
        ]
        found.append((point, masters))
    return found


def constant_vector(row):
    """The boundary constants of one canonical function, from eps^0 on."""
    by_order = {
        c["order"]: Constant.read(c["value"]) for c in document("solution")["constants"] if c["master"] == row
    }
    return [by_order.get(k, Constant.rational(0)) for k in range(5)]


def test_region_and_alphabet():
    solution = document("solution")
    assert solution["region"] == ["s > 0", "t < 0", "0 < x < 1"]
    assert solution["letters"] == ["x", "-1+x"]


def test_every_function_has_uniform_weight():
    for function in document("solution")["functions"]:
        for entry in function["orders"]:
            for term in entry["terms"]:
                weights = Constant.read(term["coefficient"]).weights()
                assert weights == {entry["order"] - len(term["word"])}


def test_most_functions_are_derived():
    """Only those of the crossed vertex and of the crossed box itself rest on fits."""
    fitted = {c["master"] for c in document("solution")["constants"] if "fitted" in c}
    assert fitted == {9, 10, 11}


def test_every_fit_is_far_from_chance():
    fitted = [c["fitted"] for c in document("solution")["constants"] if "fitted" in c]
    assert fitted
    assert max(int(fit["odds"].removeprefix("1e")) for fit in fitted) <= -20


def test_crossed_vertex():
    """``1/eps^4 - pi^2/eps^2 - 83 zeta(3)/(3 eps) - 59 pi^4/120`` times ``(-s - i0)^(-2 - 2 eps)``."""
    half_turn = Constant.generator("I") * PI * -2
    phase = [Constant.rational(1), half_turn, half_turn**2 / 2, half_turn**3 / 6, half_turn**4 / 24]
    found = constant_vector(9)
    stripped = [sum_of(found[j] * phase[k - j] for j in range(k + 1)) for k in range(5)]
    zero = Constant.rational(0)
    assert stripped == [zero + 1, zero, -(PI**2), ZETA3 * Fraction(-83, 3), PI**4 * Fraction(-59, 120)]


def test_leading_pole():
    """``2/eps^4 (1/(s^2 t) + 1/(s^2 u))``."""
    for point, masters in shipped_values():
        s, t = point["s"], point["t"]
        assert min(masters[10]) == -4
        expected = 2 / (s**2 * t) + 2 / (s**2 * (-s - t))
        assert masters[10][-4].contains(flint.acb(flint.fmpq(expected.numerator, expected.denominator)))


def test_exchange_of_t_and_u():
    """The two points of the folder are each other's crossing: the graph is symmetric under p1 <-> p2."""
    (first, here), (second, there) = shipped_values()
    assert second["t"] == -first["s"] - first["t"]
    partner = [0, 2, 1, 3, 6, 7, 4, 5, 8, 9, 10]
    for row, other in enumerate(partner):
        assert set(here[row]) == set(there[other])
        assert all(here[row][k].overlaps(there[other][k]) for k in here[row])


def masters_at(x):
    """The masters at s = 1, t = -x: the words of the folder as polylogarithms, times its transformation."""
    form, solution = document("epsform"), document("solution")
    field = ring(("eps", "x"))
    roots = {"x": Place(Fraction(0)), "-1+x": Place(Fraction(1))}
    words = sorted({tuple(t["word"]) for f in solution["functions"] for e in f["orders"] for t in e["terms"]})
    numbered = [tuple(list(roots).index(letter) for letter in word) for word in words]
    table = dict(zip(words, polylogs(numbered, tuple(roots.values()), Place(x), 40), strict=True))
    totals = [{} for _ in document("masters")["masters"]]
    with precision(BITS):
        nothing = flint.acb(0)
        functions = [
            {
                entry["order"]: sum(
                    (
                        Constant.read(term["coefficient"]).ball(BITS) * table[tuple(term["word"])]
                        for term in entry["terms"]
                    ),
                    nothing,
                )
                for entry in function["orders"]
            }
            for function in solution["functions"]
        ]
        for row, column, text in form["transformation"]:
            series = laurent(parse_rational(text, field).substitute({"x": x}), 0)
            for k, factor in enumerate(series.coefficients):
                for order, value in functions[column].items():
                    power = series.start + k + order
                    if power <= 0:
                        totals[row][power] = totals[row].get(power, nothing) + factor.ball(BITS) * value
    return totals


def test_polylogarithms_give_the_values():
    """Another route than the continuation of the differential equation, from the same constants."""
    for point, masters in shipped_values():
        for total, master in zip(masters_at(-point["t"] / point["s"]), masters, strict=True):
            for power, value in total.items():
                assert value.overlaps(master.get(power, flint.acb(0)))


@pytest.mark.slow
def test_against_the_auxiliary_mass_elsewhere(tmp_path):
    """The constants were fitted at t = -s/3; here are values at another point, without any constants."""
    family = read_family_file(ROOT / "families" / "crossed-double-box.toml")
    x = Fraction(3, 4)
    with Store(tmp_path / "store") as store:
        direct = auxiliary_at(Chain(family, store, SILENT, 1), {"s": Fraction(1), "t": -x}, 0, 22)
    for total, expected in zip(masters_at(x), direct, strict=True):
        for power, value in total.items():
            ball = expected.epsilon.get(power)
            other = flint.acb(0) if ball is None else ball_of_decimal(ball, BITS)
            assert abs(value - other) < flint.arb("1e-20") * (1 + abs(other))
