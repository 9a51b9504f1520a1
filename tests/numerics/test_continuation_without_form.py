"""Continuation by the differential system alone, order by order in eps, against solved epsilon-forms."""

from __future__ import annotations

import cmath
import math
from fractions import Fraction
from itertools import pairwise
from pathlib import Path

import flint
import pytest

from ibpred.balls.context import precision
from ibpred.balls.decimal import DecimalBall, ball_of_decimal
from ibpred.errors import PointError, UnfinishedError
from ibpred.exact.grammar import parse_rational
from ibpred.exact.rational import ring
from ibpred.numerics.laurent.crossings import around, crossings
from ibpred.numerics.laurent.expanded import expanded_system, in_epsilon, regular_shifts
from ibpred.numerics.value import Route
from ibpred.progress import SILENT
from ibpred.run.chain.chain import Chain
from ibpred.run.constants.known_points import KnownPoint, keep_point, known_points
from ibpred.run.storage.files import read_family_file
from ibpred.run.storage.store import Store
from ibpred.run.values.continued_values import continued_values
from ibpred.run.values.evaluate import evaluate

FAMILIES = Path(__file__).parents[2] / "families"
F = Fraction


def letters(names, *texts):
    field = ring(names)
    return [parse_rational(text, field) for text in texts]


class TestCrossings:
    def test_thresholds_are_passed_above_where_the_line_rises(self):
        # s - 4 m2 with s + i0: rising s passes above, falling s below
        locus = letters(("s", "m2"), "s", "m2", "s-4*m2")
        turns = {"s": 1, "m2": -1}
        up = crossings(locus, {"s": F(-1), "m2": F(1)}, {"s": F(9), "m2": F(1)}, turns)
        assert [(str(c.letter), float(c.place), c.side) for c in up] == [("s", 0.1, 1), ("s-4*m2", 0.5, 1)]
        down = crossings(locus, {"s": F(9), "m2": F(1)}, {"s": F(-1), "m2": F(1)}, turns)
        assert [c.side for c in down] == [-1, -1]
        mass = crossings(locus, {"s": F(5), "m2": F(1)}, {"s": F(5), "m2": F(2)}, turns)
        assert [(float(c.place), c.side) for c in mass] == [(0.25, -1)]

    def test_different_sides_on_one_line(self):
        locus = letters(("s", "t"), "s", "t", "s+t", "s-t")
        turns = {"s": 1, "t": 1}
        passed = crossings(locus, {"s": F(-1), "t": F(2)}, {"s": F(2), "t": F(-3)}, turns)
        sides = {str(c.letter): c.side for c in passed}
        # s - t does not move; s rises, t falls, s + t falls
        assert sides == {"s": 1, "t": -1, "s+t": -1, "s-t": 0}
        poles = [complex(float(c.place)) for c in passed]
        path = around(poles, passed)
        assert (path[0], path[-1]) == ((0, 0), (1, 0))
        for crossing in passed:
            if crossing.side:
                # the path's argument around the point turns by a half turn on the right side
                z = [complex(float(x), float(y)) - float(crossing.place) for x, y in path]
                angles = sum(cmath.phase(b / a) for a, b in pairwise(z))
                assert angles == pytest.approx(-math.pi * crossing.side)

    def test_singular_ends_and_lines(self):
        locus = letters(("s", "t"), "s", "s+t")
        with pytest.raises(PointError, match=r"lies on the singularity s\+t = 0"):
            crossings(locus, {"s": F(1), "t": F(1)}, {"s": F(1), "t": F(-1)}, {"s": 1, "t": 1})
        with pytest.raises(PointError, match="inside the singularity"):
            crossings(locus, {"s": F(1), "t": F(-1)}, {"s": F(2), "t": F(-2)}, {"s": 1, "t": 1})
        with pytest.raises(PointError, match="s = 0 lies on"):
            crossings(letters(("s",), "s"), {"s": F(0)}, {"s": F(1)}, {"s": 1})
        circle = letters(("s", "t"), "s^2+t^2-1")
        with pytest.raises(PointError, match="touches"):
            crossings(circle, {"s": F(-2), "t": F(1)}, {"s": F(2), "t": F(1)}, {"s": 0, "t": 1})


def test_rescaling_removes_poles():
    field = ring(("eps", "x"))
    matrices = {
        "x": (
            (1, 0, parse_rational("1/(eps^2*x)", field)),
            (2, 1, parse_rational("1/(eps*(x+1))", field)),
            (2, 0, parse_rational("eps/x", field)),
        )
    }
    assert regular_shifts("test", 3, matrices) == (0, 2, 3)
    coupled = {"x": ((0, 1, parse_rational("1/eps", field)), (1, 0, parse_rational("1/x", field)))}
    with pytest.raises(UnfinishedError, match="no rescaling"):
        regular_shifts("test", 2, coupled)


def chain_of(name, store):
    return Chain(read_family_file(FAMILIES / f"{name}.toml"), store, SILENT, 1)


def known(chain, point, order, digits):
    values = evaluate(chain, point, (), order, digits)
    keep_point(chain, KnownPoint(point, order, digits, tuple(value.epsilon for value in values)))


@pytest.mark.parametrize(
    ("name", "start", "points"),
    [
        ("massless-box", ("-1", "-1/3"), [("-2", "-5"), ("2", "-7/10"), ("-3", "5"), ("1", "4")]),
        (
            "box-one-leg",
            ("-1", "-1/3", "-1/5"),
            [("2", "-1/3", "1/5"), ("2", "1/3", "3"), ("-2", "1/3", "-4")],
        ),
    ],
)
def test_all_regions_from_one_euclidean_point(name, start, points, tmp_path):
    with Store(tmp_path) as store:
        chain = chain_of(name, store)
        names = [invariant.name for invariant in chain.definition.invariants]
        known(chain, dict(zip(names, map(F, start), strict=True)), 1, 45)
        for point in points:
            place = dict(zip(names, map(F, point), strict=True))
            (found,) = continued_values(chain, [place], (), 1, 30)
            for value, other in zip(found, evaluate(chain, place, (), 1, 35), strict=True):
                assert value.route is Route.CONTINUATION
                assert not value.certified
                assert value.digits() is None or value.digits() >= 30
                assert value.epsilon.keys() == other.epsilon.keys()
                for order, ball in value.epsilon.items():
                    assert ball_of_decimal(ball, 200).overlaps(ball_of_decimal(other.epsilon[order], 200))
        assert len(known_points(chain)) == 1


def test_integrals_are_reduced_and_expanded(tmp_path):
    wanted = ((2, 1, 1, 1), (1, 1, 2, 0), (1, 1, 1, 1))
    place = {"s": F(2), "t": F(-7, 10)}
    with Store(tmp_path) as store:
        chain = chain_of("massless-box", store)
        known(chain, {"s": F(-1), "t": F(-1, 3)}, 4, 50)
        (found,) = continued_values(chain, [place], wanted, 1, 20)
        for value, other in zip(found, evaluate(chain, place, wanted, 1, 25), strict=True):
            assert value.powers == other.powers
            assert value.epsilon.keys() == other.epsilon.keys()
            for order, ball in value.epsilon.items():
                assert ball_of_decimal(ball, 200).overlaps(ball_of_decimal(other.epsilon[order], 200))


def test_expansion_of_the_system_is_exact(tmp_path):
    with Store(tmp_path) as store:
        system = chain_of("massless-box", store).derivation().system
    expanded = expanded_system(system, 4)
    exact = in_epsilon(system)
    eps = F(1, 1000)
    at = {"s": F(3), "t": F(-7, 2)}
    for name in system.variables:
        total = {}
        for order, layer in enumerate(expanded.matrices[name]):
            for row, column, value in layer:
                term = value.substitute(at).to_fraction() * eps**order
                total[row, column] = total.get((row, column), 0) + term
        for row, column, value in exact[name]:
            scale = eps ** (expanded.shifts[row] - expanded.shifts[column])
            wanted = value.substitute({**at, "eps": eps}).to_fraction() * scale
            assert abs(total[row, column] - wanted) < 1000 * eps**4


def test_decimals_become_balls_that_hold_them():
    ball = ball_of_decimal(DecimalBall("1.25", "-0.5", "1e-3"), 80)
    with precision(80):
        assert ball.contains(flint.acb("1.2509", "-0.5009"))
        assert not ball.contains(flint.acb("1.252", "-0.5"))
