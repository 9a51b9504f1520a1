from __future__ import annotations

from fractions import Fraction
from pathlib import Path

import flint
import pytest
from canonical_forms import family
from mpmath import euler, exp, gamma, hyp2f1, mp, mpf, quad, taylor

from ibpred.iterated.solution_values import solution_values
from ibpred.progress import Silent
from ibpred.run.chain.chain import Chain
from ibpred.run.constants.solved import completed_boundary, solution
from ibpred.run.storage.store import Store
from ibpred.run.values.evaluate import evaluate


def chain_of(name: str, store: Store) -> Chain:
    return Chain(family(name), store, Silent(), 1)


@pytest.mark.slow
def test_the_planar_double_box_with_one_leg(tmp_path: Path) -> None:
    """Eighteen masters of three scales: all constants derived, real on both sides of every wall."""
    with Store(tmp_path) as store:
        chain = chain_of("planar-double-box-one-leg", store)
        boundary, solved = chain.boundary(4), solution(chain, 4)
    assert not boundary.fitted
    assert sum(item.confirming for item in boundary.evidence) > 1000
    values = []
    for x, y in (("1/3", "1/5"), ("1/3", "1/2"), ("2", "7/2")):
        values.append(solution_values(solved, {"x": Fraction(x), "y": Fraction(y)}, 12))
        for row in values[-1]:
            for value in row:
                assert value.imag.contains(0)
                assert value.imag.abs_upper() < flint.arb(10) ** -10
    assert all(any(not value.contains(0) for row in table for value in row) for table in values)


@pytest.mark.slow
def test_the_crossed_vertex_is_fitted(tmp_path: Path) -> None:
    """Gonsalves, Phys. Rev. D 28 (1983) 1542: 1, 0, -pi^2, -83 zeta3/3, -59 pi^4/120 (from memory)."""
    with Store(tmp_path) as store:
        boundary = completed_boundary(chain_of("crossed-vertex", store), 0)
    row = len(boundary.constants[0]) - 1
    shown = [str(vector[row]) for vector in boundary.constants]
    assert boundary.start == -4
    assert shown == ["1", "0", "-pi^2", "-83*zeta3/3", "-59*pi^4/120"]
    assert {item.row for item in boundary.fitted} == {row}
    assert all(item.fit.odds < -20 for item in boundary.fitted)


def test_the_sunrise_with_one_mass(tmp_path: Path) -> None:
    """Against the massless bubble inside the bubble with one mass:

    ``Gamma(1-e)^2 Gamma(e) Gamma(2e-1) / Gamma(2-e) 2F1(2e-1, e; 2-e; -x)`` with x = -s/m^2.
    """
    with Store(tmp_path) as store:
        chain = chain_of("sunrise-one-mass", store)
        boundary, value = (
            chain.boundary(4),
            evaluate(chain, {"s": Fraction(-1, 3), "m2": Fraction(1)}, (), 1, 15),
        )
    assert not boundary.fitted
    assert sum(item.confirming for item in boundary.evidence) > 30
    masters = {v.powers: v.epsilon for v in value}
    with mp.workdps(30):

        def squared(eps: mpf) -> mpf:
            factor = (
                gamma(1 - eps) ** 2
                * gamma(1 + eps)
                * gamma(1 + 2 * eps)
                / (2 * (2 * eps - 1) * gamma(2 - eps))
            )
            return exp(2 * eps * euler) * factor * hyp2f1(2 * eps - 1, eps, 2 - eps, -mpf(1) / 3)

        for k, coefficient in enumerate(taylor(squared, 0, 3)):
            assert mp.almosteq(mpf(masters[1, 1, 1, 0, 0][k - 2].re), coefficient, 1e-10)


def test_the_cusp_of_two_static_lines(tmp_path: Path) -> None:
    """``Gamma(1-e) Gamma(2e) (-2w)^(-2e) int_0^1 du (u^2 + (1-u)^2 + 2 u (1-u) c)^(e-1)`` at w = -1/2."""
    with Store(tmp_path) as store:
        chain = chain_of("static-quark-cusp", store)
        boundary = chain.boundary(2)
        value = evaluate(chain, {"w": Fraction(-1, 2), "c": Fraction(2)}, (), 1, 15)
    assert not boundary.fitted
    masters = {v.powers: v.epsilon for v in value}
    with mp.workdps(30):

        def times_eps(eps: mpf) -> mpf:
            integral = quad(lambda u: (u**2 + (1 - u) ** 2 + 4 * u * (1 - u)) ** (eps - 1), [0, 1])
            return exp(eps * euler) * gamma(1 - eps) * gamma(1 + 2 * eps) / 2 * integral

        for k, coefficient in enumerate(taylor(times_eps, 0, 2)):
            assert mp.almosteq(mpf(masters[1, 1, 1][k - 1].re), coefficient, 1e-10)


@pytest.mark.slow
def test_two_loop_families_without_an_open_constant(tmp_path: Path) -> None:
    """All constants derived: values of regions close what regularity leaves open."""
    for name in ("static-quark-cusp-two-loop", "planar-vertex-massive-loop"):
        with Store(tmp_path / name) as store:
            boundary = chain_of(name, store).boundary(4)
        assert not boundary.fitted
        assert sum(item.confirming for item in boundary.evidence) > 50
