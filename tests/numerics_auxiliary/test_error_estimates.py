"""The error that a fit in eps gives is one: never too small, and no more than some digits too large.

Balls do not hold the truncation of the fit; the difference made by one more eps stands for it.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from fractions import Fraction
from pathlib import Path

import closed_forms as cf
import flint
import massless_references as massless
import one_loop_references as one_loop
import pytest
from mpmath import mp, mpc, mpf

from ibpred.balls.context import precision
from ibpred.exact.primes import first_primes
from ibpred.family.definition import Powers
from ibpred.numerics.auxiliary.build import auxiliary_plan
from ibpred.numerics.auxiliary.laurent import Task, choose_sampling, fitted, one_by_one
from ibpred.run.storage.files import read_family_file

FAMILIES = Path(__file__).parents[2] / "families"
PRIMES = first_primes(40)
DIGITS = 10
WORKING = 60

Expected = Callable[[], Mapping[int, mpc]]

CASES: list[tuple[str, Powers, dict[str, str], Expected]] = [
    (
        "bubble-two-masses",
        (1, 1),
        {"s": "9", "m2": "1"},
        lambda: cf.laurent_coefficients(
            lambda eps: one_loop.equal_mass_bubble(eps, mpf(9), mpf(1)), -1, 0, WORKING
        ),
    ),
    (
        "massless-box",
        (1, 1, 1, 1),
        {"s": "3", "t": "-1"},
        lambda: cf.laurent_coefficients(lambda eps: cf.box(eps, mpf(3), mpf(-1)), -2, 0, WORKING),
    ),
    (
        "triangle-three-legs",
        (1, 1, 1),
        {"p1sq": "2", "p2sq": "3", "s": "10"},
        lambda: {0: one_loop.triangle_with_three_legs(mpf(2), mpf(3), mpf(10))},
    ),
    (
        "box-massive-loop",
        (1, 1, 1, 1),
        {"s": "5", "t": "-1/3", "m2": "1"},
        lambda: {0: one_loop.massive_box(mpf(5), mpf(-1) / 3)},
    ),
    ("crossed-vertex", (1,) * 6 + (0,), {"s": "-1"}, massless.crossed_vertex),
]

SLOW = ("box-massive-loop", "crossed-vertex")


def number(ball: flint.arb) -> mpf:
    mantissa, exponent = ball.mid().man_exp()
    return mpf(int(mantissa)) * mpf(2) ** int(exponent)


@pytest.mark.parametrize(
    ("name", "powers", "point", "expected"),
    [pytest.param(*case, id=case[0], marks=pytest.mark.slow if case[0] in SLOW else ()) for case in CASES],
)
def test_errors_are_within_their_estimates(
    name: str, powers: Powers, point: dict[str, str], expected: Expected
) -> None:
    family = read_family_file(FAMILIES / f"{name}.toml")
    exact = {key: Fraction(text) for key, text in point.items()}
    plan = auxiliary_plan(family, exact, [powers], PRIMES, 1)
    lowest = -2 * plan.loops
    sampling = choose_sampling(-lowest, DIGITS, 0)
    tasks = [Task(eps, sampling.digits, 250) for eps in sampling.points]
    values = [value for (value,) in one_by_one(plan, tasks)]
    found = fitted(sampling.points, values, lowest, 0, 1000)
    with mp.workdps(WORKING):
        known = expected()
        size = max(abs(value) for value in known.values())
        for order, ball in found.items():
            truth = mpc(known.get(order, 0)) if order in known or order < min(known) else None
            if truth is None:
                continue
            with precision(1000):
                radius = number(flint.arb(ball.real.rad().max(ball.imag.rad())))
                error = abs(mpc(number(ball.real), number(ball.imag)) - truth)
            # the references are known to some 45 digits
            assert error <= radius + mpf(10) ** -40 * size, (order, error, radius)
            assert radius <= mpf(10) ** -DIGITS * size
            if order == 0:
                assert radius <= mpf(10) ** 6 * error
