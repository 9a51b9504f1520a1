"""Auxiliary-mass values against closed forms and published numbers, Euclidean, physical and at thresholds."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from fractions import Fraction
from pathlib import Path

import closed_forms as cf
import massless_references as massless
import one_loop_references as one_loop
import pytest
from mpmath import log, mp, mpf, pi, zeta

from ibpred.exact.primes import first_primes
from ibpred.numerics.auxiliary.build import auxiliary_plan
from ibpred.numerics.auxiliary.laurent import auxiliary_values, choose_sampling, fitted
from ibpred.numerics.value import Route, Value
from ibpred.run.storage.files import read_family_file

FAMILIES = Path(__file__).parents[2] / "families"
PRIMES = first_primes(40)
DIGITS = 20


@pytest.fixture(autouse=True)
def precise():
    with mp.workdps(40):
        yield


def value_of(name: str, powers: tuple[int, ...], order: int = 0, digits: int = DIGITS, **point: str) -> Value:
    read = read_family_file(FAMILIES / f"{name}.toml")
    exact = {key: Fraction(text) for key, text in point.items()}
    plan = auxiliary_plan(read, exact, [powers], PRIMES, 1)
    (value,) = auxiliary_values(plan, order, digits)
    assert not value.certified
    assert value.route is Route.AUXILIARY_MASS
    return value


def compare(value: Value, expected: Mapping[int, object], digits: int = DIGITS) -> None:
    """Within the radius, and the radius as small as was asked for."""
    for power, reference in expected.items():
        if power not in value.epsilon:
            assert abs(reference) < mpf(10) ** -digits
            continue
        ball = value.epsilon[power]
        slack = (abs(reference) + 1) * mpf(10) ** (-digits - 8)
        assert abs(mpf(ball.re) - mpf(reference.real)) <= mpf(ball.radius) + slack, (power, ball, reference)
        assert abs(mpf(ball.im) - mpf(reference.imag)) <= mpf(ball.radius) + slack, (power, ball, reference)
        assert mpf(ball.radius) <= mpf(10) ** -digits * max(abs(reference), 1)
    assert set(value.epsilon) <= set(expected)


def test_fit_finds_the_coefficients_within_its_error() -> None:
    import flint

    from ibpred.balls.context import precision
    from ibpred.numerics.frobenius.system import fmpq

    sampling = choose_sampling(3, 20, 0)
    with precision(600):
        values = []
        for eps in sampling.points:
            x = flint.acb(flint.arb(fmpq(eps)))
            values.append(x.gamma() ** 2 * (x * flint.arb.const_euler() * 2).exp())
        found = fitted(sampling.points, values, -2, 1, 600)
        # Gamma(eps)^2 exp(2 gamma eps) = (1 + zeta(2) eps^2 - 2/3 zeta(3) eps^3 + ...)/eps^2
        expected = [1, 0, flint.arb.pi() ** 2 / 6, flint.arb(3).zeta() * -2 / 3]
        for ball, truth in zip(found.values(), expected, strict=True):
            assert (ball - truth).contains(0)
            assert ball.rad() < flint.arb(10) ** -20


@pytest.mark.parametrize("s", ["-1", "4", "9"])
def test_equal_mass_bubble_at_all_energies(s: str) -> None:
    expected = (
        cf.laurent_coefficients(
            lambda eps: one_loop.equal_mass_bubble(eps, mpf(s), mpf(1)), -1, 1, DIGITS + 10
        )
        if s != "4"
        else None
    )
    value = value_of("bubble-two-masses", (1, 1), order=1, s=s, m2="1")
    if expected is None:
        # at the threshold Gamma(eps) (1/4)^-eps-type integrals: int_0^1 (1-2y)^(-2 eps) dy = 1/(1-2 eps)
        expected = cf.laurent_coefficients(
            lambda eps: mp.exp(eps * mp.euler) * mp.gamma(eps) / (1 - 2 * eps), -1, 1, DIGITS + 10
        )
    compare(value, expected)


@pytest.mark.parametrize(("s", "t"), [("-1", "-1/3"), ("3", "-1")])
def test_massless_box(s: str, t: str) -> None:
    s_, t_ = (mpf(Fraction(v).numerator) / Fraction(v).denominator for v in (s, t))
    expected = cf.laurent_coefficients(lambda eps: cf.box(eps, s_, t_), -2, 0, DIGITS + 10)
    compare(value_of("massless-box", (1, 1, 1, 1), s=s, t=t), expected)


@pytest.mark.slow
def test_massive_box_above_threshold() -> None:
    expected = one_loop.massive_box(mpf(5), mpf(-1) / 3)
    compare(value_of("box-massive-loop", (1, 1, 1, 1), s="5", t="-1/3", m2="1"), {0: expected}, 20)


@pytest.mark.parametrize(("p1sq", "p2sq", "s"), [("-2", "-3", "-1"), ("2", "3", "10")])
def test_triangle_with_three_legs(p1sq: str, p2sq: str, s: str) -> None:
    expected = one_loop.triangle_with_three_legs(mpf(p1sq), mpf(p2sq), mpf(s))
    compare(value_of("triangle-three-legs", (1, 1, 1), p1sq=p1sq, p2sq=p2sq, s=s), {0: expected})


def test_dots_are_derivatives_in_the_mass() -> None:
    # d/dm2 of the bubble is minus twice the bubble with one dot
    def dotted(eps):
        return -mp.diff(lambda m2: cf.equal_mass_bubble(eps, mpf(-1), m2), 1) / 2

    with mp.workdps(60):
        expected = cf.laurent_coefficients(dotted, 0, 1, 10)
    compare(value_of("bubble-two-masses", (2, 1), order=1, digits=12, s="-1", m2="1"), expected, 12)


def test_kite() -> None:
    value = value_of("kite", (1, 1, 1, 1, 1), s="-1")
    compare(value, {0: 6 * zeta(3)})


def test_crossed_vertex_from_nothing() -> None:
    # Gonsalves, Phys. Rev. D28 (1983) 1542; Kramer, Lampe, J. Math. Phys. 28 (1987) 945
    value = value_of("crossed-vertex", (1, 1, 1, 1, 1, 1, 0), digits=12, s="-1")
    compare(value, massless.crossed_vertex(), 12)


def test_two_dimensional_sunrise_at_its_pseudo_threshold() -> None:
    # S(s = m2) = pi^2/4 in d = 2 (Bloch, Vanhove, arXiv:1309.5865, from memory)
    read = replace(read_family_file(FAMILIES / "sunrise-equal-masses.toml"), dimension=2)
    point = {"s": Fraction(1), "m2": Fraction(1)}
    plan = auxiliary_plan(read, point, [(1, 1, 1, 0, 0)], PRIMES, 1)
    (value,) = auxiliary_values(plan, 0, 12)
    compare(value, {0: pi**2 / 4}, 12)


def test_sunrise_at_its_pseudo_threshold() -> None:
    # s = m2: the leading poles are -3/2 and s/4 - 9/2
    value = value_of("sunrise-equal-masses", (1, 1, 1, 0, 0), digits=12, s="1", m2="1")
    assert abs(mpf(value.epsilon[-2].re) + mpf(3) / 2) < mpf(10) ** -12
    assert abs(mpf(value.epsilon[-1].re) + mpf(17) / 4) < mpf(10) ** -12


@pytest.mark.slow
def test_two_dimensional_sunrise_below_and_above_threshold() -> None:
    from bessel_bananas import coefficients

    read = replace(read_family_file(FAMILIES / "sunrise-equal-masses.toml"), dimension=2)
    for s in ("-1", "20"):
        point = {"s": Fraction(s), "m2": Fraction(1)}
        plan = auxiliary_plan(read, point, [(1, 1, 1, 0, 0)], PRIMES, 1)
        (value,) = auxiliary_values(plan, 1, DIGITS)
        compare(value, coefficients(2, (1, 1, 1), (1, 1, 1), mpf(s), (0, 1), DIGITS + 8))


@pytest.mark.slow
def test_sunrise_below_and_above_threshold() -> None:
    from bessel_bananas import coefficients

    for s in ("-1", "20"):
        value = value_of("sunrise-equal-masses", (1, 1, 1, 0, 0), s=s, m2="1")
        compare(value, coefficients(4, (1, 1, 1), (1, 1, 1), mpf(s), (-2, 0), DIGITS + 8))


@pytest.mark.slow
def test_planar_double_box_to_thirty_digits() -> None:
    value = value_of("planar-double-box", (1, 1, 1, 1, 1, 1, 1, 0, 0), digits=30, s="-1", t="-1/3")
    with mp.workdps(50):
        poles = cf.double_box_poles(mpf(1) / 3)
        expected = {k: c * 3 for k, c in poles.items()}
        # from the solved epsilon-form, which shares no boundary input with this route
        expected[0] = mpf("-530.181409474332317930265212704545")
        compare(value, expected, 30)


@pytest.mark.slow
def test_non_planar_three_loop_propagator() -> None:
    value = value_of("propagator-non-planar", (1,) * 8 + (0,), s="-1")
    compare(value, massless.finite_three_loop_propagators())


@pytest.mark.slow
def test_three_loop_banana() -> None:
    from bessel_bananas import coefficients

    value = value_of("banana-three-loop", (1, 1, 1, 1) + (0,) * 5, s="-1", m2="1")
    compare(value, coefficients(4, (1,) * 4, (1,) * 4, mpf(-1), (-3, 0), DIGITS + 8))


@pytest.mark.slow
def test_four_loop_banana() -> None:
    from bessel_bananas import coefficients

    value = value_of("banana-four-loop", (1,) * 5 + (0,) * 9, digits=10, s="-1/3", m2="1")
    compare(value, coefficients(4, (1,) * 5, (1,) * 5, mpf(-1) / 3, (-4, 0), 20), 10)


@pytest.mark.slow
def test_double_box_in_the_physical_region_is_the_continued_one() -> None:
    # s = 3, t = -1/3: the poles of the Euclidean closed form continued in log(x), x = t/s, -s -> s exp(-i pi)
    value = value_of("planar-double-box", (1, 1, 1, 1, 1, 1, 1, 0, 0), s="3", t="-1/3")
    s, t = mpf(3), mpf(-1) / 3
    log_x = log(-t / s) + 1j * pi
    # (-s)^(-2-2 eps)/(-t) times 4/eps^4 - 5 L/eps^3 + ...
    shift = -2 * (log(s) - 1j * pi)
    prefactor = 1 / (s**2 * -t)
    assert abs(mpf(value.epsilon[-4].re) - (4 * prefactor).real) < mpf(10) ** -DIGITS
    third = prefactor * (-5 * log_x + 4 * shift)
    assert abs(mpf(value.epsilon[-3].re) - third.real) < mpf(10) ** -DIGITS
    assert abs(mpf(value.epsilon[-3].im) - third.imag) < mpf(10) ** -DIGITS
