"""The box with a massive loop in all regions: two routes that share only the reduction.

From one Euclidean point, where the epsilon-form gives them, the masters are carried past the thresholds
s = 4 m2, t = 4 m2 and the leading singularity s t = 4 m2 (s + t); the auxiliary-mass method gives them at
each point by itself.
"""

from fractions import Fraction
from pathlib import Path

import pytest
from mpmath import log, mp, mpf, sqrt

from ibpred.balls.decimal import ball_of_decimal
from ibpred.numerics.value import Route
from ibpred.progress import SILENT
from ibpred.run.chain.chain import Chain
from ibpred.run.constants.known_points import auxiliary_at
from ibpred.run.storage.files import read_family_file
from ibpred.run.storage.store import Store
from ibpred.run.values.continued_values import continued_values

FAMILIES = Path(__file__).parents[2] / "families"
F = Fraction

POINTS = [
    (F(5), F(-1)),  # above the s threshold
    (F(3), F(-2)),  # below it
    (F(-7), F(9)),
    (F(20), F(-15)),
    (F(6), F(7)),  # both above threshold
]


@pytest.mark.slow
def test_carried_values_are_those_of_the_auxiliary_mass(tmp_path):
    family = read_family_file(FAMILIES / "box-massive-loop.toml")
    with Store(tmp_path) as store:
        chain = Chain(family, store, SILENT, 1)
        for s, t in POINTS:
            point = {"s": s, "t": t, "m2": F(1)}
            (carried,) = continued_values(chain, [point], (), 0, 15)
            direct = auxiliary_at(chain, point, 0, 15)
            for value, other in zip(carried, direct, strict=True):
                assert value.route is Route.EPSILON_FORM  # at the start
                assert value.certified
                for order, ball in value.epsilon.items():
                    difference = ball_of_decimal(ball, 120) - ball_of_decimal(other.epsilon[order], 120)
                    assert abs(complex(difference)) < 1e-13


def test_triangle_above_and_below_threshold(tmp_path):
    # -s I/... = -(1/(2 s)) log^2((beta+1)/(beta-1)), beta^2 = 1 - 4 m2/s, s + i0 (from memory)
    from solving import values

    for s in (F(10), F(3), F(-2)):
        found = values("triangle-massive-loop", tmp_path, {"s": s, "m2": F(1)}, 0, 20)
        ball = found[1, 1, 1].epsilon[0]
        with mp.workdps(40):
            z = mp.mpc(mpf(s.numerator) / s.denominator, mpf(10) ** -36 if s > 0 else 0)
            beta = sqrt(1 - 4 / z)
            wanted = -(log((beta + 1) / (beta - 1)) ** 2) / (2 * z)
            assert abs(mp.mpc(ball.re, ball.im) - wanted) < mpf(10) ** -19
