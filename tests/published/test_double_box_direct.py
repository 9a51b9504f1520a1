"""The eight masters of the planar double box against direct integration of their parametric forms.

Direct integration (sector decomposition and randomised quasi-Monte Carlo, `ibpred.numerics.direct`) shares
no code with identities, differential equations, boundary conditions or series.
"""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path

import pytest
from solving import FAMILIES, values

from ibpred.numerics.direct import direct_value
from ibpred.run.storage.files import read_family_file

POINT = {"s": Fraction(-1), "t": Fraction(-1, 3)}


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return tmp_path_factory.mktemp("store")


def check(folder: Path, samples: int, relative: float) -> None:
    family = read_family_file(FAMILIES / "planar-double-box.toml")
    solved = values("planar-double-box", folder, {"s": "-1", "t": "-1/3"}, 0, 20)
    assert len(solved) == 8
    for powers, value in solved.items():
        direct = direct_value(family, powers, POINT, order=0, seed=7, samples=samples)
        assert set(value.epsilon) <= set(direct)
        for order, (number, error) in direct.items():
            exact = float(value.epsilon[order].re) if order in value.epsilon else 0.0
            size = max(abs(float(ball.re)) for ball in value.epsilon.values())
            assert abs(number - exact) < 6 * error + 1e-12 * size, (powers, order, number, exact, error)
            assert error < relative * size, (powers, order, error)


def test_two_digits(folder: Path) -> None:
    check(folder, 10_000, 1e-2)


@pytest.mark.slow
def test_five_digits(folder: Path) -> None:
    check(folder, 200_000, 2e-4)
