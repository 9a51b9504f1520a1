"""Values of eps shared out to processes are the same balls."""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path

import flint
import pytest

from ibpred.balls.context import precision
from ibpred.errors import PointError
from ibpred.exact.primes import first_primes
from ibpred.numerics.auxiliary.build import auxiliary_plan
from ibpred.numerics.auxiliary.laurent import Task, one_by_one
from ibpred.run.storage.files import read_family_file
from ibpred.run.workers.auxiliary_processes import _ball_of, _data_of, process_sampler

FAMILIES = Path(__file__).parents[2] / "families"


def test_balls_travel_whole() -> None:
    with precision(300):
        ball = flint.acb(flint.arb(2).sqrt(), flint.arb(-3, flint.arb("1e-40")))
    again = _ball_of(_data_of(ball))
    with precision(400):
        assert again.real.mid() - ball.real.mid() == 0
        for ours, theirs in ((again.real, ball.real), (again.imag, ball.imag)):
            # radii are rounded upwards
            assert theirs.rad() <= ours.rad()
            assert ours.rad() <= theirs.rad() * (1 + flint.arb("1e-7"))


def test_two_processes_give_the_same_values_in_order() -> None:
    bubble = read_family_file(FAMILIES / "bubble-two-masses.toml")
    plan = auxiliary_plan(bubble, {"s": Fraction(-1), "m2": Fraction(1)}, [(1, 1)], first_primes(20), 1)
    tasks = [Task(Fraction(1, 100 + i), 20, 150) for i in range(3)]
    for here, there in zip(one_by_one(plan, tasks), process_sampler(2)(plan, tasks), strict=True):
        with precision(300):
            assert (here[0] - there[0]).contains(0)
            assert there[0].rad() <= here[0].rad() * 2
    # errors come back as what they are
    for sampler in (one_by_one, process_sampler(2)):
        with pytest.raises(PointError, match="nonzero eps"):
            list(sampler(plan, [Task(Fraction(0), 20, 150)] * 2))
