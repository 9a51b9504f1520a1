from __future__ import annotations

from fractions import Fraction
from itertools import product

import pytest
from canonical_forms import family
from hypothesis import assume, example, given
from hypothesis import strategies as st
from mpmath import euler, exp, gamma, mp, mpf

from ibpred.boundary.behaviour.approach import Approach
from ibpred.boundary.behaviour.expansion import expand
from ibpred.boundary.behaviour.gamma import gamma_form
from ibpred.boundary.behaviour.parametric import EpsLinear, GammaProduct, parametric_product
from ibpred.boundary.behaviour.regions import Region, parametric_family, regions
from ibpred.exact.rational import Rational, ring
from ibpred.family.reading import read_family
from ibpred.iterated.transport import INFINITY, Point

NUMBERS = ring(("eps",))
FIELD = ring(("eps", "x"))
X = FIELD.variable("x")


def value(found: GammaProduct | None) -> mpf:
    """At eps = 0."""
    assert found is not None
    result = mpf(found.prefactor.numerator) / found.prefactor.denominator
    for a, _ in found.numerator:
        result *= gamma(mpf(a.numerator) / a.denominator)
    for a, _ in found.denominator:
        result /= gamma(mpf(a.numerator) / a.denominator)
    for scale, (p, _) in found.scales:
        number = scale.to_fraction()
        result *= (mpf(number.numerator) / number.denominator) ** (mpf(p.numerator) / p.denominator)
    return result


def plain(value_: Fraction | int) -> EpsLinear:
    return Fraction(value_), Fraction(0)


def terms(*items: tuple[tuple[int, ...], int]) -> dict[tuple[int, ...], Rational]:
    return {e: NUMBERS.constant(c) for e, c in items}


@given(
    st.lists(st.tuples(*[st.integers(0, 3)] * 2), min_size=3, max_size=3, unique=True),
    st.lists(st.integers(1, 5), min_size=3, max_size=3),
    st.lists(st.integers(1, 4), min_size=3, max_size=3),
)
@example([(0, 0), (0, 3), (3, 0)], [1, 1, 1], [1, 1, 1])  # 1 + y^3 must not be split
def test_simplices_are_dirichlet_integrals(
    corners: list[tuple[int, int]], coefficients: list[int], weights: list[int]
) -> None:
    """``int x^(a-1) (sum c_i x^(r_i))^-l = prod Gamma(b_i) c_i^-b_i / (Gamma(l) |det|)``, a = sum b_i r_i."""
    (ax, ay), (bx, by), (cx, cy) = corners
    determinant = (bx - ax) * (cy - ay) - (by - ay) * (cx - ax)
    assume(determinant)
    powers = [sum(w * r[i] for w, r in zip(weights, corners, strict=True)) for i in range(2)]
    found = parametric_product(
        terms(*zip(corners, coefficients, strict=True)), plain(sum(weights)), [plain(p) for p in powers]
    )
    expected = 1 / (gamma(sum(weights)) * abs(determinant))
    for b, c in zip(weights, coefficients, strict=True):
        expected *= gamma(b) * mpf(c) ** -b
    assert mp.almosteq(value(found), expected, 1e-10)


def test_a_factorised_polynomial() -> None:
    """``(x y + x z + y z)(1 + x + y)``, a vacuum integral with two equal masses."""
    first = [(1, 1, 0), (1, 0, 1), (0, 1, 1)]
    second = [(0, 0, 0), (1, 0, 0), (0, 1, 0)]
    total: dict[tuple[int, ...], int] = {}
    for a, b in product(first, second):
        key = tuple(i + j for i, j in zip(a, b, strict=True))
        total[key] = total.get(key, 0) + 1
    powers = [Fraction(3, 2), Fraction(4, 3), Fraction(3, 4)]
    found = parametric_product(terms(*total.items()), plain(Fraction(5, 2)), [plain(p) for p in powers])

    # z, then the scale of (x, y), then their ratio, each Euler's integral
    a, b, c, scale = mpf(3) / 2, mpf(4) / 3, mpf(3) / 4, mpf(5) / 2
    over_z = gamma(c) * gamma(scale - c) / gamma(scale)
    power = a + b + c - 2 * scale
    over_scale = gamma(power) * gamma(scale - power) / gamma(scale)
    left, right = a + c - scale, b + c - scale
    over_ratio = gamma(left) * gamma(right) / gamma(left + right)
    assert mp.almosteq(value(found), over_z * over_scale * over_ratio, 1e-12)


def test_scaleless_and_irreducible_polynomials_are_left_alone() -> None:
    square = terms(((1, 1), 1), ((1, 0), 1))
    assert parametric_product(square, plain(2), [plain(1), plain(1)]) is None
    box = terms(*(((int(i == 0), int(i == 1), int(i == 2), int(i == 3)), 1) for i in range(4)))
    box |= terms(((1, 0, 1, 0), 1), ((0, 1, 0, 1), 2))
    assert parametric_product(box, (Fraction(2), Fraction(-1)), [plain(1)] * 4) is None


SUNRISE = """
[momenta]
loop = ["k1", "k2"]
external = ["p"]
[kinematics]
invariants = { m2 = 2 }
equations = ["p^2 = m2"]
[[line]]
momentum = "k1"
mass2 = "m2"
[[line]]
momentum = "k2"
[[line]]
momentum = "p-k1-k2"
"""


@pytest.mark.parametrize("powers", [(1, 1, 1), (2, 1, 1), (1, 2, 1)])
def test_sunrise_on_shell(powers: tuple[int, int, int]) -> None:
    """A massless bubble inside the bubble on shell, each a textbook formula."""
    defined = read_family(SUNRISE, "made.toml", "made")
    form = gamma_form(defined, (*powers, *(0,) * (len(defined.lines) - 3)))
    assert form is not None
    eps = mpf("0.137")
    half = 2 - eps
    m, a, b = powers
    inside = gamma(half - a) * gamma(half - b) * gamma(a + b - half)
    inside /= gamma(a) * gamma(b) * gamma(2 * half - a - b)
    light = a + b - half
    outside = gamma(light + m - half) * gamma(2 * half - 2 * light - m)
    outside /= gamma(m) * gamma(2 * half - light - m)
    result = mpf(form.prefactor.numerator) / form.prefactor.denominator
    for arguments, sign in ((form.numerator, 1), (form.denominator, -1)):
        for c, s in arguments:
            result *= gamma(mpf(c.numerator) / c.denominator + mpf(s.numerator) / s.denominator * eps) ** sign
    assert mp.almosteq(result, inside * outside, 1e-12)


def leading_series(region: Region, order: int) -> list[complex]:
    """``sum of pieces`` as numbers, eps^-1 to eps^order."""
    assert region.leading is not None
    pieces = region.leading.closed
    assert pieces is not None
    total = [0.0] * (order + 2)
    for number, closed in pieces:
        series = expand(closed, order)
        for k in range(-1, order + 1):
            if series.start <= k:
                total[k + 1] += float(number) * float(series.coefficient(k).ball(80).real)
    return total


def bubble_regions(powers: tuple[int, ...], point: Point) -> dict[tuple[Fraction, Fraction], Region]:
    values = {"s": -X, "m2": FIELD.one}
    found = regions(parametric_family(family("bubble-one-mass"), values), powers, Approach((), "x", point))
    assert found is not None
    return {(r.exponent.power[0], r.exponent.slope[0]): r for r in found}


def test_leading_terms_of_a_bubble() -> None:
    """``Gamma(eps)/(1-eps) 2F1(1, eps; 2-eps; -x)`` at x = 0 and, by its connection formula, at infinity."""
    with mp.workdps(30):

        def expected(function: object) -> list[float]:
            return [float(c) for c in mp.taylor(function, 0, 3)]

        factor = lambda eps: exp(eps * euler)  # noqa: E731
        here = bubble_regions((1, 1), Fraction(0))[Fraction(0), Fraction(0)]
        at_zero = expected(lambda eps: factor(eps) * gamma(1 + eps) / (1 - eps))
        assert leading_series(here, 2) == pytest.approx(at_zero, abs=1e-10)
        far = bubble_regions((1, 1), INFINITY)
        hard = expected(lambda eps: factor(eps) * gamma(1 + eps) * gamma(1 - eps) ** 2 / gamma(2 - 2 * eps))
        assert leading_series(far[Fraction(0), Fraction(1)], 2) == pytest.approx(hard, abs=1e-10)
        soft = expected(lambda eps: factor(eps) * gamma(1 + eps) / (eps - 1))
        assert leading_series(far[Fraction(1), Fraction(0)], 2) == pytest.approx(soft, abs=1e-10)


def test_leading_terms_with_a_numerator() -> None:
    """A numerator that is a line: (2,-1) of the bubble is its reduction to the tadpole at x = 0.

    At p = 0 the massless line is the massive one less 1: ``int (D - 1)/D^2 = I(0,1) - I(0,2)``.
    """
    lines = family("bubble-one-mass").lines
    massive = next(i for i, line in enumerate(lines) if line.mass2)
    powers = tuple(2 if i == massive else -1 for i in range(2))
    with mp.workdps(30):
        here = bubble_regions(powers, Fraction(0))[Fraction(0), Fraction(0)]

        def times_eps(eps: mpf) -> mpf:
            return exp(eps * euler) * gamma(1 + eps) * (1 / (eps - 1) - 1)

        expected = [float(c) for c in mp.taylor(times_eps, 0, 3)]
        assert leading_series(here, 2) == pytest.approx(expected, abs=1e-10)
