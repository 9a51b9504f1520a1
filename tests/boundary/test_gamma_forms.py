from __future__ import annotations

from collections.abc import Mapping

import pytest
from canonical_forms import family
from mpmath import euler, exp, gamma, mp, mpf, quad
from scipy.integrate import dblquad

from ibpred.boundary.behaviour.gamma import GammaForm, closed_forms, gamma_form
from ibpred.family.definition import FamilyDefinition
from ibpred.family.reading import read_family


def made(text: str) -> FamilyDefinition:
    return read_family(text, "made.toml", "made")


def value(form: GammaForm | None, kinematics: Mapping[str, int], eps: mpf) -> mpf:
    assert form is not None

    def at(argument: tuple[object, object]) -> mpf:
        a, b = argument
        return mpf(a.numerator) / a.denominator + mpf(b.numerator) / b.denominator * eps

    result = exp(form.loops * eps * euler) * mpf(form.prefactor.numerator) / form.prefactor.denominator
    for argument in form.numerator:
        result *= gamma(at(argument))
    for argument in form.denominator:
        result /= gamma(at(argument))
    for scale, exponent in form.scales:
        number = scale.substitute(dict(kinematics)).to_fraction()
        result *= (mpf(number.numerator) / number.denominator) ** at(exponent)
    return result


def one_loop_two_lines(a: int, b: int, eps: mpf, first: mpf, second: mpf, minus_p2: mpf) -> mpf:
    """Feynman's formula for two lines with masses squared `first`, `second`, in d = 4 - 2 eps."""
    half = 2 - eps

    def integrand(y: mpf) -> mpf:
        scale = y * first + (1 - y) * second + y * (1 - y) * minus_p2
        return y ** (a - 1) * (1 - y) ** (b - 1) * scale ** (half - a - b)

    factor = gamma(a + b - half) / (gamma(a) * gamma(b))
    return exp(eps * euler) * factor * quad(integrand, [0, mpf(1) / 2, 1])


TWO_LINES = """
[momenta]
loop = ["k"]
external = ["p"]
[kinematics]
invariants = {{ s = 2, m2 = 2 }}
equations = ["p^2 = {square}"]
[[line]]
momentum = "k"
{first}
[[line]]
momentum = "k+p"
mass2 = "m2"
"""


@pytest.mark.parametrize("powers", [(1, 1), (2, 1), (1, 3)])
def test_massless_bubble(powers: tuple[int, int]) -> None:
    eps = mpf(-7) / 3
    expected = one_loop_two_lines(*powers, eps, mpf(0), mpf(0), mpf(3))
    assert mp.almosteq(value(gamma_form(family("bubble"), powers), {"s": -3}, eps), expected, 1e-10)


@pytest.mark.parametrize(
    ("square", "first"), [("m2", ""), ("0", ""), ("0", 'mass2 = "m2"')], ids=["on-shell", "zero", "two"]
)
@pytest.mark.parametrize("powers", [(1, 1), (2, 1), (1, 2)])
def test_massive_bubbles_at_special_momenta(square: str, first: str, powers: tuple[int, int]) -> None:
    eps = mpf(-7) / 3
    form = gamma_form(made(TWO_LINES.format(square=square, first=first)), powers)
    minus_p2 = mpf(-2 if square == "m2" else 0)
    expected = one_loop_two_lines(*powers, eps, mpf(2 if first else 0), mpf(2), minus_p2)
    assert mp.almosteq(value(form, {"s": 1, "m2": 2}, eps), expected, 1e-10)


def test_massive_bubble_at_general_momentum_is_no_product() -> None:
    assert gamma_form(made(TWO_LINES.format(square="s", first="")), (1, 1)) is None


VACUUM = """
[momenta]
loop = ["k1", "k2"]
external = []
[kinematics]
invariants = {{ m2 = 2 }}
equations = []
[[line]]
momentum = "k1"
mass2 = "m2"
[[line]]
momentum = "k2"
{second}
[[line]]
momentum = "k1-k2"
"""


@pytest.mark.parametrize("second", ["", 'mass2 = "m2"'], ids=["one mass", "two masses"])
@pytest.mark.parametrize("powers", [(1, 1, 1), (2, 1, 1), (3, 1, 1)])
def test_two_loop_vacuum(second: str, powers: tuple[int, int, int]) -> None:
    """Against the parametric integral in d = 2.4, where it converges; F = U sum x_i m_i^2."""
    eps = 0.8
    half = 2 - eps
    total = sum(powers)

    def integrand(v: float, u: float) -> float:
        # x1 + x2 = 1 (Cheng, Wu), x3 = v/(1-v)
        x1, x2, x3 = u, 1 - u, v / (1 - v)
        first = x1 * x2 + x1 * x3 + x2 * x3
        masses = x1 + (x2 if second else 0)
        # U^(a - 3d/2) F^(d - a) with F = U * masses
        return x1 ** (powers[0] - 1) * first**-half * masses ** (2 * half - total) / (1 - v) ** 2

    integral, _ = dblquad(integrand, 0, 1, 0, 1, epsrel=1e-4)
    expected = exp(2 * eps * euler) * gamma(total - 2 * half) * integral
    for power in powers:
        expected /= gamma(power)
    found = value(gamma_form(made(VACUUM.format(second=second)), powers), {"m2": 1}, mpf(eps))
    assert mp.almosteq(found, expected, 2e-3)


def bubble_factor(a: mpf, b: mpf, eps: mpf) -> mpf:
    h = 2 - eps
    return gamma(h - a) * gamma(h - b) * gamma(a + b - h) / (gamma(a) * gamma(b) * gamma(2 * h - a - b))


def test_nested_three_loop_propagator() -> None:
    """A bubble in a bubble in a bubble, and a dotted chain."""
    text = """
[momenta]
loop = ["k1", "k2", "k3"]
external = ["p"]
[kinematics]
invariants = { s = 2 }
equations = ["p^2 = s"]
[[line]]
momentum = "k1"
[[line]]
momentum = "k1-k2"
[[line]]
momentum = "k2"
[[line]]
momentum = "k2-k3"
[[line]]
momentum = "k3"
[[line]]
momentum = "k3+p"
"""
    defined = made(text)
    rest = (0,) * (len(defined.lines) - 6)
    eps = mpf("0.13")
    form = gamma_form(defined, (1, 2, 1, 1, 1, 1, *rest))
    first = bubble_factor(1, 2, eps)
    second = bubble_factor(1 + 1 + eps, 1, eps)
    third = bubble_factor(1 + 1 + 2 * eps, 1, eps)
    overall = first * second * third * mpf(2) ** (2 - eps - 3 - 2 * eps) * exp(3 * eps * euler)
    assert mp.almosteq(value(form, {"s": -2}, eps), overall, 1e-12)


def test_which_masters_have_closed_forms() -> None:
    forms = closed_forms(family("kite"), ((1, 1, 1, 1, 0), (1, 1, 1, 1, 1), (0, 1, 1, 1, 0), (1, 0, 0, 0, 1)))
    assert forms[1] is None
    assert any(form is not None for form in forms)
    double_box = family("planar-double-box")
    assert gamma_form(double_box, (1, 1, 1, 1, 1, 1, 1, 0, 0)) is None
    assert gamma_form(double_box, (1, 0, 1, 0, 1, 1, 0, -1, 0)) is None
    crossed = family("crossed-vertex")
    assert gamma_form(crossed, (1, 1, 1, 1, 1, 1, *(0,) * (len(crossed.lines) - 6))) is None


@pytest.mark.parametrize("powers", [(1, 1), (2, 1), (1, 3)])
def test_static_self_energy(powers: tuple[int, int]) -> None:
    """``Gamma(2a + b - d) Gamma(d/2 - a) / (Gamma(a) Gamma(b)) (-2w)^(d - 2a - b)`` for lines -k^2 and
    -2 k.v - 2 w (as in Broadhurst, Grozin, hep-ph/9410240)."""
    a, b = powers
    eps = mpf("0.17")
    d = 4 - 2 * eps
    expected = gamma(2 * a + b - d) * gamma(d / 2 - a) / (gamma(a) * gamma(b)) * exp(eps * euler)
    form = gamma_form(family("heavy-quark-self-energy"), powers)
    assert mp.almosteq(value(form, {"w": -3}, eps), expected * mpf(6) ** (d - 2 * a - b), 1e-12)


def test_triangle_with_light_like_legs() -> None:
    """F has one term, so Feynman's integral is Dirichlet's: checked against a plain quadrature."""
    eps = mpf(-2) / 3
    half = 2 - eps

    def integrand(u: mpf, v: mpf) -> mpf:
        # x1 = u v, x2 = 1 - u, x3 = u (1 - v): F = x1 x3 (-s)
        return u * (u * u * v * (1 - v)) ** (half - 3)

    expected = exp(eps * euler) * gamma(3 - half) * quad(integrand, [0, 1], [0, 0.5, 1])
    found = value(gamma_form(family("triangle-one-leg"), (1, 1, 1)), {"s": -1}, eps)
    assert mp.almosteq(found, expected, 1e-3)
