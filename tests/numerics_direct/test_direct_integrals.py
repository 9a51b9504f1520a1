"""Direct integration against closed forms: values must agree within their own error estimates."""

from __future__ import annotations

from fractions import Fraction
from itertools import combinations
from pathlib import Path

import pytest
from mpmath import euler, exp, expjpi, gamma, log, mp, mpc, mpf, pi, zeta

import ibpred
from ibpred.errors import InputError
from ibpred.family.reading import read_family
from ibpred.numerics.direct import direct_integral, direct_value

FAMILIES = Path(ibpred.__file__).parent.parent / "families"
TWO = mpf(2)
Values = dict[int, tuple[float, float]]


def family(name: str):
    path = FAMILIES / f"{name}.toml"
    return read_family(path.read_text(encoding="utf-8"), path.name, name)


def laurent(function, lowest: int, highest: int) -> dict[int, float]:
    """Laurent coefficients from values on a circle of radius 1/8."""
    with mp.workdps(30):
        count, radius = 64, mpf(1) / 8
        at = [radius * expjpi(mpf(2 * j) / count) for j in range(count)]
        values = [function(eps) for eps in at]
        return {
            k: float(sum(v * eps**-k for v, eps in zip(values, at, strict=True)).real / count)
            for k in range(lowest, highest + 1)
        }


def agree(found: Values, expected: dict[int, float], digits: float) -> None:
    """Within six estimated standard deviations, and these small enough."""
    scale = max(abs(v) for v in expected.values())
    for k, value in expected.items():
        if k < min(found):
            assert abs(value) < 1e-20
            continue
        middle, error = found[k]
        assert abs(middle - value) <= 6 * error + 1e-10 * scale, (k, middle, error, value)
        assert error <= scale * 10**-digits
    for k in set(found) - set(expected):
        assert k < min(expected)
        assert abs(found[k][0]) <= 6 * found[k][1] + 1e-10 * scale


def bubble(a: int, b: int, eps: mpc, half: mpf = TWO) -> mpc:
    """Massless bubble with powers a, b at p^2 = -1 in d = 2 * half - 2 eps."""
    h = half - eps
    result = exp(eps * euler) * gamma(a + b - h) * gamma(h - a) * gamma(h - b)
    return result / (gamma(a) * gamma(b) * gamma(2 * h - a - b))


BUBBLE = ({(1, 0): 1.0, (0, 1): 1.0}, {(1, 1): 1.0})


@pytest.mark.parametrize(("a", "b"), [(1, 1), (2, 1), (2, 2), (1, 3), (3, 2)])
@pytest.mark.parametrize("dimension", [2, 4, 6])
def test_massless_bubbles_with_dots_in_several_dimensions(a: int, b: int, dimension: int) -> None:
    found = direct_integral(*BUBBLE, [a, b], 1, dimension, 2, 1, 20_000)
    agree(found, laurent(lambda eps: bubble(a, b, eps, mpf(dimension) / 2), -1, 2), 5)


def test_three_dimensions() -> None:
    found = direct_integral(*BUBBLE, [1, 1], 1, 3, 2, 1, 20_000)
    agree(found, laurent(lambda eps: bubble(1, 1, eps, mpf(3) / 2), 0, 2), 5)


@pytest.mark.parametrize("power", [1, 2, 3, 4])
def test_massive_tadpoles(power: int) -> None:
    found = direct_integral({(1,): 1.0}, {(2,): 3.0}, [power], 1, 4, 2, 1, 2_000)

    def closed(eps: mpc) -> mpc:
        h = 2 - eps
        return exp(eps * euler) * gamma(power - h) / gamma(power) * mpf(3) ** (h - power)

    agree(found, laurent(closed, -1, 2), 9)


def box_to_order_zero(s: float, t: float) -> dict[int, float]:
    """Bern, Dixon, Kosower, hep-ph/9306240, with -s = s, -t = t positive."""

    def closed(eps: mpc) -> mpc:
        c = exp(eps * euler) * gamma(1 + eps) * gamma(1 - eps) ** 2 / gamma(1 - 2 * eps)
        return c / (s * t) * (2 / eps**2 * (s**-eps + t**-eps) - log(mpf(s) / t) ** 2 - pi**2)

    return laurent(closed, -2, 0)


BOX_U = {(1, 0, 0, 0): 1.0, (0, 1, 0, 0): 1.0, (0, 0, 1, 0): 1.0, (0, 0, 0, 1): 1.0}


def test_massless_box() -> None:
    found = direct_integral(
        BOX_U, {(1, 0, 1, 0): 1.0, (0, 1, 0, 1): 1 / 3}, [1, 1, 1, 1], 1, 4, 0, 1, 100_000
    )
    agree(found, box_to_order_zero(1.0, 1 / 3), 5)


def test_error_estimates_are_honest() -> None:
    expected = box_to_order_zero(1.0, 1.0)
    pulls = []
    for seed in range(12):
        found = direct_integral(
            BOX_U, {(1, 0, 1, 0): 1.0, (0, 1, 0, 1): 1.0}, [1, 1, 1, 1], 1, 4, 0, seed, 3_000
        )
        pulls += [(found[k][0] - expected[k]) / found[k][1] for k in (-2, -1, 0)]
    assert max(abs(pull) for pull in pulls) < 6
    assert 0.2 < sum(pull**2 for pull in pulls) / len(pulls) < 4


def test_equal_seeds_give_equal_numbers() -> None:
    runs = [direct_integral(*BUBBLE, [1, 1], 1, 4, 0, seed, 2_000) for seed in (4, 4, 5)]
    assert runs[0] == runs[1]
    assert runs[0] != runs[2]


def triangle(eps: mpc) -> mpc:
    """One off-shell leg at -1."""
    return exp(eps * euler) * gamma(1 + eps) * gamma(-eps) ** 2 / gamma(1 - 2 * eps)


def test_massless_triangle_with_one_off_shell_leg() -> None:
    u = {(1, 0, 0): 1.0, (0, 1, 0): 1.0, (0, 0, 1): 1.0}
    found = direct_integral(u, {(1, 0, 1): 1.0}, [1, 1, 1], 1, 4, 1, 1, 20_000)
    agree(found, laurent(triangle, -2, 1), 5)


def sunrise(eps: mpc) -> mpc:
    return exp(2 * eps * euler) * gamma(2 * eps - 1) * gamma(1 - eps) ** 3 / gamma(3 - 3 * eps)


def test_massless_sunrise() -> None:
    pairs = {(0, 1, 1): 1.0, (1, 0, 1): 1.0, (1, 1, 0): 1.0}
    found = direct_integral(pairs, {(1, 1, 1): 1.0}, [1, 1, 1], 2, 4, 1, 1, 20_000)
    agree(found, laurent(sunrise, -1, 1), 5)


def spanning(edges: list[tuple[int, int]], p: tuple[int, int]) -> tuple[dict, dict]:
    """U and F of a massless two-point graph at p^2 = -1, from trees and two-forests by definition."""
    vertices = sorted({v for e in edges for v in e})
    u, f = {}, {}
    for removed in range(len(edges) + 1):
        for cut in combinations(range(len(edges)), removed):
            part = {v: v for v in vertices}

            def root(v: int, part: dict = part) -> int:
                return v if part[v] == v else root(part[v], part)

            cyclic = False
            for i, (a, b) in enumerate(edges):
                if i not in cut:
                    if root(a) == root(b):
                        cyclic = True
                        break
                    part[root(a)] = root(b)
            if cyclic:
                continue
            pieces = len({root(v) for v in vertices})
            monomial = tuple(int(i in cut) for i in range(len(edges)))
            if pieces == 1:
                u[monomial] = 1.0
            elif pieces == 2 and root(p[0]) != root(p[1]):
                f[monomial] = 1.0
    return u, f


def test_kite_is_six_zeta_three() -> None:
    u, f = spanning([(1, 2), (1, 3), (2, 4), (3, 4), (2, 3)], (1, 4))
    found = direct_integral(u, f, [1] * 5, 2, 4, 0, 1, 50_000)
    agree(found, {0: float(6 * zeta(3))}, 5)


def test_three_loop_ladder_is_twenty_zeta_five() -> None:
    """Chetyrkin, Kataev, Tkachov, Nucl. Phys. B174 (1980) 345; the value from memory."""
    u, f = spanning([(1, 2), (1, 3), (2, 3), (2, 4), (3, 5), (4, 5), (4, 6), (5, 6)], (1, 6))
    found = direct_integral(u, f, [1] * 8, 3, 4, 0, 1, 3_000)
    agree(found, {0: float(20 * zeta(5))}, 2.5)


@pytest.mark.parametrize(
    ("name", "expected"),
    [
        # R. Gonsalves, Phys. Rev. D28 (1983) 1542; the coefficients are from memory
        ("crossed-vertex", [1, 0, -(pi**2), -83 * zeta(3) / 3, -59 * pi**4 / 120]),
        ("planar-vertex", [mpf(1) / 4, 0, 5 * pi**2 / 24, 29 * zeta(3) / 6, 3 * pi**4 / 32]),
    ],
)
def test_two_loop_form_factors(name: str, expected: list[mpf]) -> None:
    lines = family(name)
    powers = [1] * 6 + [0] * (len(lines.lines) - 6)
    found = direct_value(lines, powers, {"s": -1}, 0, 1, 40_000)
    agree(found, {k - 4: float(value) for k, value in enumerate(expected)}, 3)


def test_numerators_against_tensor_reduction() -> None:
    """k -> -P/2 and its rank-two analogue in a bubble of the box; the fourth line as numerator."""
    box = family("massless-box")
    point = {"s": -1, "t": Fraction(-1, 3)}
    one = direct_value(box, [1, 0, 1, -1], point, 2, 1, 20_000)
    agree(one, laurent(lambda eps: -bubble(1, 1, eps) / 2, -1, 2), 5)
    two = direct_value(box, [1, 0, 1, -2], point, 2, 1, 20_000)

    def closed(eps: mpc) -> mpc:
        d = 4 - 2 * eps
        return bubble(1, 1, eps) * d / (4 * (d - 1))

    agree(two, laurent(closed, -1, 2), 5)


def test_numerators_respect_the_graphs_symmetry() -> None:
    """A reflection of the box exchanges its second and fourth line."""
    box = family("massless-box")
    point = {"s": -1, "t": Fraction(-1, 3)}
    first = direct_value(box, [1, 1, 1, -1], point, 0, 1, 20_000)
    second = direct_value(box, [1, -1, 1, 1], point, 0, 2, 20_000)
    for k in (-2, -1, 0):
        assert abs(first[k][0] - second[k][0]) <= 6 * (first[k][1] + second[k][1])


def test_planar_double_box_poles() -> None:
    """V. Smirnov, hep-ph/9905323: 4, -5 log x, 2 log^2 x - 5 pi^2/2 over s^2 t; from memory."""
    lines = family("planar-double-box")
    found = direct_value(lines, [1] * 7 + [0, 0], {"s": -1, "t": Fraction(-1, 3)}, -2, 1, 20_000)
    x = mpf(1) / 3
    expected = [12, -15 * log(x), 3 * (2 * log(x) ** 2 - 5 * pi**2 / 2)]
    agree(found, {k - 4: float(value) for k, value in enumerate(expected)}, 3)


@pytest.mark.slow
def test_planar_double_box_to_three_digits() -> None:
    lines = family("planar-double-box")
    point = {"s": -1, "t": Fraction(-1, 3)}
    coarse = direct_value(lines, [1] * 7 + [0, 0], point, 0, 1, 60_000)
    fine = direct_value(lines, [1] * 7 + [0, 0], point, 0, 2, 200_000)
    for k in range(-4, 1):
        assert fine[k][1] < 1e-3 * abs(fine[k][0])
        assert abs(fine[k][0] - coarse[k][0]) <= 6 * coarse[k][1]


def test_what_cannot_be_integrated_is_refused() -> None:
    with pytest.raises(InputError, match="Euclidean"):
        direct_integral({(1, 0): 1.0, (0, 1): 1.0}, {(1, 1): -1.0}, [1, 1], 1, 4, 0, 1, 100)
    with pytest.raises(InputError, match="scaleless"):
        direct_integral({(1, 0): 1.0, (0, 1): 1.0}, {(1, 1): 1.0}, [1, 0], 1, 4, 0, 1, 100)
    with pytest.raises(InputError, match="differ in length"):
        direct_integral({(1, 0): 1.0, (0, 1): 1.0}, {(1, 1): 1.0}, [1, 1, 1], 1, 4, 0, 1, 100)
    u = {(1, 0, 0): 1.0, (0, 1, 0): 1.0, (0, 0, 1): 1.0}
    with pytest.raises(InputError, match="scaleless"):  # a massless triangle with all legs on shell
        direct_integral(u, {(1, 1, 0): 0.0}, [1, 1, 1], 1, 4, 0, 1, 100)
