from __future__ import annotations

from fractions import Fraction

import pytest
from canonical_forms import EPS, FIELD, X, family
from mpmath import euler, exp, expjpi, gamma, mp, mpc, mpf

from ibpred.boundary.behaviour.expansion import ClosedForm, expand, on_line
from ibpred.boundary.behaviour.gamma import EpsLinear, GammaForm, gamma_form
from ibpred.boundary.conditions.local import class_sum, contributions
from ibpred.boundary.problem import closed_form_on_line, one_scale_values
from ibpred.errors import BoundaryError, InputError
from ibpred.exact.rational import ring
from ibpred.iterated.constants.constants import Constant, sum_of

NUMBERS = ring(("eps",))


def linear(a: str, b: str) -> EpsLinear:
    return Fraction(a), Fraction(b)


def coefficients(form: GammaForm, lowest: int, highest: int) -> list[mpf]:
    """Laurent coefficients by the trapezoidal rule on a circle."""
    radius, count = mpf(1) / 8, 64
    samples = []
    for j in range(count):
        eps = radius * expjpi(mpf(2 * j + 1) / count)
        total: mpc = exp(form.loops * eps * euler)
        for a, b in form.numerator:
            total *= gamma(mpf(a.numerator) / a.denominator + b * eps)
        for a, b in form.denominator:
            total /= gamma(mpf(a.numerator) / a.denominator + b * eps)
        samples.append((eps, total))
    return [(sum(v * e**-k for e, v in samples) / count).real for k in range(lowest, highest + 1)]


@pytest.mark.parametrize(
    "form",
    [
        GammaForm(2, Fraction(1), (linear("-1", "2"),) + (linear("1", "-1"),) * 3, (linear("3", "-3"),), ()),
        GammaForm(1, Fraction(1), (linear("-2", "1"),), (), ()),
        GammaForm(
            1,
            Fraction(1),
            (linear("1/2", "1"), linear("-3/2", "-1"), linear("1", "-1")),
            (linear("2", "-2"),),
            (),
        ),
        GammaForm(
            1,
            Fraction(1),
            (linear("1/2", "-1"), linear("1/2", "-1"), linear("1/2", "1")),
            (linear("1/2", "0"), linear("1", "-2")),
            (),
        ),
    ],
)
def test_expansion_against_a_contour(form: GammaForm) -> None:
    with mp.workdps(30):
        series = expand(on_line(form, {}, NUMBERS), 4)
        expected = coefficients(form, series.start, 4)
        for k, number in zip(range(series.start, 5), expected, strict=True):
            assert abs(complex(series.coefficient(k).ball(80)).real - number) < 1e-11 * (1 + abs(number))


def test_bubble_at_the_unit_scale() -> None:
    (series,) = one_scale_values(family("bubble"), ((1, 1),), {"s": -1}, 2)
    assert series.start == -1
    assert [str(c) for c in series.coefficients] == ["1", "2", "-pi^2/12 + 4", "-pi^2/6 - 7*zeta3/3 + 8"]


def test_masters_without_closed_form_are_named() -> None:
    kite = family("kite")
    with pytest.raises(BoundaryError, match=r"kite\(1,1,1,1,1\)"):
        one_scale_values(kite, ((1, 1, 1, 1, 1),), {"s": -1}, 2)
    with pytest.raises(InputError, match="1 ratios, not 0"):
        one_scale_values(family("massless-box"), ((1, 0, 1, 0),), {"s": -1, "t": -1}, 2)


def on_the_box_line(powers: tuple[int, ...]) -> ClosedForm:
    form = gamma_form(family("massless-box"), powers)
    assert form is not None
    return on_line(form, {"s": FIELD.constant(-1), "t": -X}, FIELD)


def test_the_ratio_is_kept_as_a_power() -> None:
    assert on_the_box_line((0, 1, 0, 1)).letters == ((X, Fraction(-1)),)
    assert on_the_box_line((1, 0, 1, 0)).letters == ()
    with pytest.raises(BoundaryError, match="depends on a ratio"):
        expand(on_the_box_line((0, 1, 0, 1)), 2)


def test_negative_scales_are_refused_where_all_should_be_real() -> None:
    with pytest.raises(BoundaryError, match="not real"):
        closed_form_on_line(family("bubble"), (1, 1), {"s": NUMBERS.one}, NUMBERS, True)


def test_a_negative_scale_has_its_i0() -> None:
    """The bubble at s = 1 is ``(-1 - i0)^-eps = exp(i pi eps)`` times that at s = -1."""
    above = closed_form_on_line(family("bubble"), (1, 1), {"s": NUMBERS.one}, NUMBERS, False)
    below = closed_form_on_line(family("bubble"), (1, 1), {"s": -NUMBERS.one}, NUMBERS, False)
    assert above is not None
    assert below is not None
    assert (above.half_turns, below.half_turns) == (1, 0)
    pi, real = Constant.generator("I") * Constant.generator("pi"), expand(below, 2)
    phase = [Constant.rational(1), pi, pi**2 / 2, pi**3 / 6]
    for k in range(-1, 3):
        product = sum_of(real.coefficient(j) * phase[k - j] for j in range(-1, k + 1))
        assert expand(above, 2).coefficient(k) == product


def test_the_side_of_a_product_of_scales_is_not_guessed() -> None:
    s, t = ring(("s", "t")).variable("s"), ring(("s", "t")).variable("t")
    form = GammaForm(1, Fraction(1), (linear("1", "1"),), (), ((s * t, linear("0", "-1")),))
    with pytest.raises(BoundaryError, match="side of its branch point"):
        on_line(form, {"s": FIELD.one, "t": -X}, FIELD)


def test_wrong_euler_constant_is_noticed() -> None:
    with pytest.raises(BoundaryError, match="Euler"):
        expand(on_line(GammaForm(1, Fraction(1), (linear("1", "2"),), (), ()), {}, NUMBERS), 2)


def test_local_expansion_of_letters() -> None:
    """eps/x^2 * (2 + x)^(-2 eps) x^(3 eps): the coefficients of x^-2, x^-1, x^0."""
    closed = ClosedForm(FIELD.one, ((X, Fraction(3)), (X + 2, Fraction(-2))), (), 0, {}, {})
    found = contributions(EPS / X**2, closed, ("x",))
    assert [item.slopes for item in found] == [(3,)] * 3
    assert [item.powers for item in found] == [(-2,), (-1,), (0,)]
    # (1 + x/2)^(-2 eps) = 1 - eps x + (eps^2/2 + eps/4) x^2
    assert [item.coefficient for item in found] == [EPS, -(EPS**2), EPS * (EPS**2 / 2 + EPS / 4)]
    log2 = Constant.generator("log2")
    series = class_sum(found, (Fraction(3),), (-2,), 3)
    assert [series.coefficient(k) for k in range(1, 4)] == [Constant.rational(1), log2 * -2, log2 * log2 * 2]


def test_successive_expansion() -> None:
    """(x + y)^(-eps)/(x + y) at y << x: x^-1-eps (1 - (1 + eps) y/x + ...)."""
    two = ring(("eps", "x", "y"))
    x, y, eps = (two.variable(n) for n in ("x", "y", "eps"))
    closed = ClosedForm(1 / (x + y), ((x + y, Fraction(-1)),), (), 0, {}, {})
    found = contributions(x / y, closed, ("y", "x"))
    assert [(c.powers, c.slopes, str(c.coefficient)) for c in found] == [
        ((-1, 0), (0, -1), "1"),
        ((0, -1), (0, -1), str(-1 - eps)),
    ]
