"""Lines linear in the loop momenta: curved, evaluated, and straightened again."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from fractions import Fraction
from pathlib import Path

import closed_forms as cf
import pytest
from mpmath import acosh, euler, exp, gamma, log, mp, mpc, mpf, pi, quad, sqrt

import ibpred.numerics.auxiliary.build as build
from ibpred.errors import UnfinishedError
from ibpred.exact.primes import first_primes
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.numerics.auxiliary.build import auxiliary_plan
from ibpred.numerics.auxiliary.curved import FLATNESS, curved, linear_lines
from ibpred.numerics.auxiliary.families import at_point
from ibpred.numerics.auxiliary.laurent import auxiliary_values
from ibpred.numerics.value import Value
from ibpred.run.storage.files import read_family_file

FAMILIES = Path(__file__).parents[2] / "families"
PRIMES = first_primes(40)
DIGITS = 12


def family(name: str) -> FamilyDefinition:
    return read_family_file(FAMILIES / f"{name}.toml")


def values_of(name: str, wanted: list[Powers], order: int = 0, **point: str) -> tuple[Value, ...]:
    exact = {key: Fraction(text) for key, text in point.items()}
    plan = auxiliary_plan(family(name), exact, wanted, PRIMES, 1)
    assert any(node.straightening is not None for node in plan.nodes)
    return auxiliary_values(plan, order, DIGITS)


def compare(value: Value, expected: Mapping[int, mpc]) -> None:
    for power, reference in expected.items():
        if power not in value.epsilon:
            assert abs(reference) < mpf(10) ** -DIGITS
            continue
        ball = value.epsilon[power]
        slack = mpf(ball.radius) + mpf(10) ** -(DIGITS + 6)
        assert abs(mpc(ball.re, ball.im) - reference) <= 2 * slack
        assert mpf(ball.radius) <= mpf(10) ** -DIGITS * max(abs(reference), 1)
    assert set(value.epsilon) <= set(expected)


def test_a_curved_line_is_the_linear_one_minus_the_square_of_its_loop_momentum() -> None:
    cusp = at_point(family("static-quark-cusp-two-loop"), {"w": Fraction(-1, 2), "c": Fraction(3, 2)})
    bent = curved(cusp)
    r = bent.kinematic_ring.variable(FLATNESS)
    for i, (before, after) in enumerate(zip(cusp.lines, bent.lines, strict=True)):
        assert before.linear == after.linear
        if i not in linear_lines(cusp):
            assert before.quadratic == after.quadratic
            continue
        assert after.momentum is not None
        inner = after.momentum[:2]
        assert after.quadratic == tuple(tuple(-a * b for b in inner) for a in inner)
        assert after.constant == before.constant.to_ring(bent.kinematic_ring) * r


def cusp(eps: mpc, w: mpf, c: mpf) -> mpc:
    """``Gamma(1-eps) Gamma(2 eps) (-2w)^(-2 eps) int_0^1 (1 + 2 (c-1) y (1-y))^(-1+eps)``.

    Schwinger's parameters x1, s y, s (1-y): the first two integrals are Gamma functions.
    """
    angle = quad(lambda y: (1 + 2 * (c - 1) * y * (1 - y)) ** (eps - 1), [0, 0.5, 1])
    return exp(eps * euler) * gamma(1 - eps) * gamma(2 * eps) * (-2 * w) ** (-2 * eps) * angle


@pytest.mark.slow
def test_cusp_of_two_static_quarks() -> None:
    with mp.workdps(30):
        expected = cf.laurent_coefficients(lambda e: cusp(e, mpf(-1) / 2, mpf(3) / 2), -1, 1, 20)
        (value,) = values_of("static-quark-cusp", [(1, 1, 1)], 1, w="-1/2", c="3/2")
        compare(value, expected)


@pytest.mark.slow
def test_worldline_box_in_the_physical_region() -> None:
    """A bubble in d - 2 dimensions times ``int_0^oo dt/(t^2 - 2 y t + 1 - i0)/2``.

    Schwinger's parameters of the two worldlines in polar form; y > 1 is physical.
    """
    y = mpf(2)
    with mp.workdps(30):
        angle = (-acosh(y) + 1j * pi) / sqrt(y * y - 1)

        def closed(eps: mpc) -> mpc:
            bubble = exp(eps * euler) * gamma(1 + eps) * gamma(-eps) ** 2 / gamma(-2 * eps)
            return bubble * exp(-(1 + eps) * log(3)) * angle / 2

        expected = cf.laurent_coefficients(closed, -1, 1, 20)
        (value,) = values_of("post-minkowskian-box", [(1, 1, 1, 1)], 1, y="2", q2="3")
        compare(value, expected)


@pytest.mark.parametrize(
    ("name", "powers"),
    [
        ("heavy-quark-self-energy", (1, 1)),
        ("heavy-quark-self-energy", (2, 1)),
        pytest.param("heavy-quark-self-energy-two-loop", (1, 1, 1, 1, 1), marks=pytest.mark.slow),
        pytest.param("heavy-quark-self-energy-crossed", (1, 1, 1, 1, 0), marks=pytest.mark.slow),
        pytest.param("eikonal-vertex", (1, 1, 1), marks=pytest.mark.slow),
    ],
)
def test_static_and_eikonal_lines_against_gamma_functions(
    name: str, powers: Powers, monkeypatch: pytest.MonkeyPatch
) -> None:
    """What has a closed form comes out of the flow as well, without closed forms of linear lines."""
    lines = family(name)
    point = {"w": Fraction(-2, 7)}
    known = auxiliary_values(auxiliary_plan(lines, point, [powers], PRIMES, 1), 0, DIGITS)
    original = build.gamma_form

    def only_quadratic(where: FamilyDefinition, wanted: Powers) -> object:
        linear = [i for i, line in enumerate(where.lines) if line.momentum is None]
        return None if any(wanted[i] > 0 for i in linear) else original(where, wanted)

    monkeypatch.setattr(build, "gamma_form", only_quadratic)
    flowed = values_of(name, [powers], w="-2/7")
    for one, other in zip(known, flowed, strict=True):
        compare(other, {k: mpc(ball.re, ball.im) for k, ball in one.epsilon.items()})


def test_external_momenta_of_linear_lines_stand_alone() -> None:
    lines = at_point(family("static-quark-cusp"), {"w": Fraction(-1), "c": Fraction(2)})
    shifted = replace(lines.lines[0], linear=((Fraction(-2), Fraction(0)),), momentum=None)
    with pytest.raises(UnfinishedError, match="v1 occurs in linear lines and in line 1"):
        curved(replace(lines, lines=(shifted, *lines.lines[1:])))


def test_cut_lines_are_refused() -> None:
    point = {"y": Fraction(2), "q2": Fraction(1)}
    with pytest.raises(UnfinishedError, match="is cut; a cut fixes which identities hold"):
        auxiliary_plan(family("post-minkowskian-two-loop"), point, [(1,) * 9], PRIMES, 1)
