"""Fan, lattice, series, sector steps and the compiled sum, each against its definition."""

from __future__ import annotations

import itertools
from fractions import Fraction

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ibpred.errors import InputError, PointError
from ibpred.kernels.parametric import sector_sums
from ibpred.numerics.direct.fan import coverage, simplicial_fan
from ibpred.numerics.direct.lattice import lattice, prime_at_least
from ibpred.numerics.direct.polynomial import add, derivative, multiply, scaled, without
from ibpred.numerics.direct.prefactor import exponential, gamma_series
from ibpred.numerics.direct.sector import Integrand, differentiated, logarithmic


@given(st.integers(1, 4), st.integers(0, 2**32))
@settings(max_examples=40, deadline=None)
def test_cones_cover_random_directions_once_and_fix_the_least_point(n: int, seed: int) -> None:
    random = np.random.default_rng(seed)
    points = np.concatenate(
        [random.integers(0, 4, size=(n + 8, n)), np.eye(n, dtype=int), np.zeros((1, n), dtype=int)]
    )
    cones = simplicial_fan(points)
    assert (coverage(cones, random.normal(size=(300, n))) == 1).all()
    for cone in cones:
        heights = cone.rays @ points.T
        least = heights == heights.min(axis=1)[:, None]
        assert least.all(axis=0).any()  # one point is least along all rays
        assert cone.volume == round(abs(np.linalg.det(cone.rays)))


def test_a_degenerate_polytope_is_scaleless() -> None:
    with pytest.raises(InputError, match="scaleless"):
        simplicial_fan(np.array([[0, 0], [1, 1], [2, 2]]))


@pytest.mark.parametrize("dimensions", [1, 3, 6])
def test_lattice_integrates_a_periodic_function(dimensions: int) -> None:
    points = prime_at_least(4000)
    z = lattice(points, dimensions)
    x = np.arange(points)[:, None] * z / points % 1.0
    values = (1 + np.sin(2 * np.pi * x) / 2 + (x * x - x + 1 / 6)).prod(axis=1)
    assert values.mean() == pytest.approx(1.0, abs=2e-5)


def test_lattice_components_are_best_one_after_the_other() -> None:
    """The fast search against the definition: the kernel's product summed over the lattice."""
    points, chosen = 61, lattice(61, 4)

    def bernoulli(x: np.ndarray) -> np.ndarray:
        return 2 * np.pi**2 * (x * x - x + 1 / 6)

    k = np.arange(points)
    product = np.ones(points)
    for j in range(4):
        error = {
            z: (product * (1 + bernoulli(k * z / points % 1.0) / (j + 1))).mean() for z in range(1, points)
        }
        assert error[int(chosen[j])] == pytest.approx(min(error.values()), rel=1e-9)
        product *= 1 + bernoulli(k * int(chosen[j]) / points % 1.0) / (j + 1)


@pytest.mark.parametrize(
    ("constant", "slope"), [(1, 2), (0, 1), (-2, 3), (0.5, -1), (-1.5, 2), (4, -2), (-3, -1)]
)
def test_gamma_series_against_values(constant: float, slope: float) -> None:
    series = gamma_series(constant, slope, 14)
    eps = 0.02
    value = sum(c * eps ** (series.lowest + k) for k, c in enumerate(series.coefficients))
    assert value == pytest.approx(float(mpmath.gamma(constant + slope * eps)), rel=1e-12)


def test_products_of_series() -> None:
    rates = np.array([0.3, 1.0, -2.0, 0.5])
    twice = exponential(rates, 4).times(exponential(rates, 4))
    assert twice.coefficients == pytest.approx(exponential(2 * rates, 4).coefficients)


terms = st.dictionaries(
    st.tuples(st.integers(0, 2), st.integers(0, 2)), st.integers(-4, 4).map(float), max_size=5
)


@given(terms, terms, st.floats(0.1, 0.9), st.floats(0.1, 0.9))
@settings(max_examples=40, deadline=None)
def test_polynomials_against_values(a: dict, b: dict, x: float, y: float) -> None:
    def value(poly: dict, at: tuple[float, ...]) -> float:
        return sum(c * np.prod([t**k for t, k in zip(at, e, strict=True)]) for e, c in poly.items())

    at = (x, y)
    assert value(multiply(a, b), at) == pytest.approx(value(a, at) * value(b, at), abs=1e-9)
    assert value(add(a, scaled(b, 3.0)), at) == pytest.approx(value(a, at) + 3 * value(b, at), abs=1e-9)
    assert value(without(a, 0, value=1), (y,)) == pytest.approx(value(a, (1.0, y)), abs=1e-9)
    assert value(without(a, 1, value=0), (x,)) == pytest.approx(value(a, (x, 0.0)), abs=1e-9)
    step = 1e-5
    slope = (value(a, (x + step, y)) - value(a, (x - step, y))) / (2 * step)
    assert value(derivative(a, 0), at) == pytest.approx(slope, abs=1e-6)


def series_value(series: tuple[float, ...], eps: float) -> float:
    return sum(c * eps**k for k, c in enumerate(series))


def density(g: Integrand, t: tuple[float, ...], eps: float) -> float:
    def poly(p: dict) -> float:
        return float(sum(c * np.prod([x**k for x, k in zip(t, e, strict=True)]) for e, c in p.items()))

    result = series_value(g.series, eps) * poly(g.q)
    result *= poly(g.u) ** (g.u_power[0] + eps * g.u_power[1]) * poly(g.f) ** (
        g.f_power[0] + eps * g.f_power[1]
    )
    for x, (a, b) in zip(t, g.exponents, strict=True):
        result *= x ** (a + b * eps)
    return result


EXAMPLE = Integrand(
    (1.0,) + (0.0,) * 19,
    ((-3.0, 2.0),),
    {(0,): 1.0, (1,): 2.0},
    {(0,): 1.0, (1,): 1.0},
    {(0,): 2.0, (1,): 1.0, (2,): 0.5},
    (-1.0, 3.0),
    (1.0, -2.0),
)


def test_integration_by_parts_continues_the_integral() -> None:
    """At large eps the original converges, too: both must agree there."""
    eps = 1.2
    whole = mpmath.quad(lambda t: density(EXAMPLE, (float(t),), eps), [0, 0.01, 1])
    parts = logarithmic([EXAMPLE])
    assert all(a > -1 - 1e-9 for part in parts for a, _ in part.exponents)
    small = 0.05
    total = sum(_integral(part, small) for part in parts)
    assert total == pytest.approx(_continued(small), rel=1e-8)
    assert float(whole) == pytest.approx(_continued(eps), rel=1e-6)


def _integral(part: Integrand, eps: float) -> float:
    if not part.exponents:
        return density(part, (), eps)
    (a, b) = part.exponents[0]
    bare = Integrand(part.series, ((0.0, 0.0),), part.q, part.u, part.f, part.u_power, part.f_power)
    at_zero = density(bare, (0.0,), eps)
    inner = mpmath.quad(
        lambda t: t ** (a + b * eps) * (density(bare, (float(t),), eps) - at_zero), [0, 0.01, 0.1, 1]
    )
    return float(inner) + at_zero / (a + 1 + b * eps)


def _continued(eps: float) -> float:
    """The example by subtraction of its Taylor polynomial at t = 0."""
    taylor = mpmath.taylor(lambda t: _smooth(t, eps), 0, 12)  # the remainder below 0.01 is negligible
    a, b = EXAMPLE.exponents[0]
    inner = mpmath.quad(
        lambda t: t ** (a + b * eps) * (_smooth(t, eps) - sum(c * t**k for k, c in enumerate(taylor))),
        [0.01, 0.1, 1],
    )
    return float(inner) + sum(float(c) / (a + k + 1 + b * eps) for k, c in enumerate(taylor))


def _smooth(t: mpmath.mpf, eps: float) -> mpmath.mpf:
    return (1 + 2 * t) * (1 + t) ** (-1 + 3 * eps) * (2 + t + t * t / 2) ** (1 - 2 * eps)


def test_negative_powers_are_derivatives() -> None:
    g = Integrand(
        (1.0, 0.0, 0.0, 0.0),
        ((1.0, 0.0), (0.0, 0.0)),
        {(0, 0): 1.0},
        {(1, 0): 1.0, (0, 1): 2.0},
        {(2, 0): 1.0, (1, 1): -0.5, (0, 2): 3.0},
        (2.0, 1.0),
        (-3.0, -2.0),
    )
    eps, x = 0.3, 0.7

    def function(y: mpmath.mpf) -> mpmath.mpf:
        return (x + 2 * y) ** (2 + eps) * (x * x - y * x / 2 + 3 * y * y) ** (-3 - 2 * eps)

    for order in range(4):
        expected = (-1) ** order * mpmath.diff(function, 0, order)
        found = sum(density(part, (x,), eps) / x for part in differentiated([g], 1, order))
        assert found == pytest.approx(float(expected), rel=1e-7)


def test_unregulated_divergences_are_refused() -> None:
    item = Integrand((1.0,), ((-1.0, 0.0),), {(0,): 1.0}, {(0,): 1.0}, {(0,): 1.0}, (0.0, 0.0), (0.0, 0.0))
    with pytest.raises(InputError, match="not regulate"):
        logarithmic([item])


def test_compiled_sum_against_the_subtraction_formula() -> None:
    """Resummed at a small eps, the series must equal the formula evaluated point by point."""
    u = {(0, 0, 0): 1.0, (1, 0, 0): 1.0, (0, 1, 1): 2.0}
    f = {(0, 0, 0): 2.0, (1, 1, 0): 1.0, (0, 0, 2): 0.5}
    q = {(0, 0, 0): 1.0, (0, 1, 0): -3.0}
    constants, slopes = np.array([-1.0, 0.5, -1.0]), np.array([-1.0, 2.0, -3.0])
    u_power, f_power = np.array([0.5, 2.0]), np.array([-2.0, -1.0])
    generator, points, shift = np.array([1, 5, 7]), 23, np.array([[0.1, 0.27, 0.83]])

    def arrays(poly: dict) -> tuple[np.ndarray, np.ndarray]:
        return np.array(list(poly)), np.array(list(poly.values()))

    terms = 16
    sums = sector_sums(
        generator, points, shift, *arrays(u), *arrays(f), *arrays(q), u_power, f_power, slopes, constants,
        np.array([0, 2]), terms,
    )  # fmt: skip
    eps = 0.01
    found = sum(c * eps ** (k - 2) for k, c in enumerate(sums[0]))

    def value(poly: dict, t: list[float]) -> float:
        return sum(c * np.prod([x**k for x, k in zip(t, e, strict=True)]) for e, c in poly.items())

    def smooth(t: list[float]) -> float:
        return (
            value(q, t)
            * value(u, t) ** (u_power[0] + eps * u_power[1])
            * value(f, t) ** (f_power[0] + eps * f_power[1])
        )

    expected = 0.0
    for k in range(points):
        x = (k * generator / points + shift[0]) % 1.0
        t = x**3 * (10 - 15 * x + 6 * x * x)
        weight = np.prod(30 * x**2 * (1 - x) ** 2) * t[1] ** (constants[1] + slopes[1] * eps)
        for zero in itertools.product((False, True), repeat=2):
            factor, at = weight, list(t)
            for j, gone in zip((0, 2), zero, strict=True):
                singular = t[j] ** (-1 + slopes[j] * eps)
                factor *= 1 / (slopes[j] * eps) - singular if gone else singular
                at[j] = 0.0 if gone else at[j]
            expected += factor * smooth(at) / points
    assert found == pytest.approx(expected, rel=1e-9)


def test_graph_polynomials_of_a_bubble_with_one_mass() -> None:
    from ibpred.family.reading import read_family
    from ibpred.numerics.direct.graph import graph_polynomials

    text = """
title = "x"
[momenta]
loop = ["k"]
external = ["p1"]
[kinematics]
invariants = { s = 2, m2 = 2 }
equations = ["p1^2 = s"]
[[line]]
momentum = "k"
mass2 = "m2"
[[line]]
momentum = "k+p1"
"""
    family = read_family(text, "x.toml", "x")
    u, f = graph_polynomials(family, {"s": -2, "m2": Fraction(1, 2)})
    assert u == {(1, 0): 1.0, (0, 1): 1.0}
    assert f == {(1, 1): 2.5, (2, 0): 0.5}
    with pytest.raises(PointError, match="m2 has no value"):
        graph_polynomials(family, {"s": -2})
    with pytest.raises(PointError, match="no invariant"):
        graph_polynomials(family, {"s": -2, "m2": 1, "t": 3})
