"""One-loop families with masses or three off-shell legs, from the file to digits, in all regions."""

from __future__ import annotations

import one_loop_references as one_loop
import pytest
from bessel_bananas import small_circle
from closed_forms import laurent_coefficients, tadpole
from mpmath import mp, mpc, mpf, sqrt
from solving import compare, values

DIGITS = 30


@pytest.fixture(autouse=True)
def _digits():
    with mp.workdps(45):
        yield


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    return tmp_path_factory.mktemp("store")


def finite(value):
    """A function of weight zero in eps: only eps^0 is compared."""
    return {0: mpc(value)}


def bubble_circle(s, m1sq, m2sq, order):
    return small_circle(
        lambda eps: one_loop.distinct_mass_bubble(eps, s, m1sq, m2sq),
        -1,
        order,
        DIGITS + 6,
        s < (sqrt(m1sq) + sqrt(m2sq)) ** 2,
    )


@pytest.mark.parametrize("s", ["-1", pytest.param("3", marks=pytest.mark.slow), "9"])
def test_bubble_of_equal_masses(s, folder):
    name = "bubble-two-masses"
    found = values(name, folder / name, {"s": s, "m2": "2"}, 1, DIGITS)
    point = mp.convert(s), mpf(2)
    compare(found[1, 0], laurent_coefficients(lambda e: tadpole(e, mpf(2)), -1, 1, 38), DIGITS)
    expected = laurent_coefficients(lambda e: one_loop.equal_mass_bubble(e, *point), -1, 1, 38)
    compare(found[1, 1], expected, DIGITS)


@pytest.mark.parametrize("s", ["-1", "1/40", pytest.param("1", marks=pytest.mark.slow), "9"])
def test_bubble_of_distinct_masses(s, folder):
    # below the pseudo-threshold (sqrt(2)-1)^2 = 0.17.., between, above the threshold 5.8..
    name = "bubble-distinct-masses"
    found = values(name, folder / name, {"s": s, "m1sq": "1", "m2sq": "2"}, 1, DIGITS)
    compare(found[1, 1], bubble_circle(mp.convert(s), mpf(1), mpf(2), 1), DIGITS)


@pytest.mark.parametrize("s", ["-1", pytest.param("3", marks=pytest.mark.slow), "9"])
def test_on_shell_vertex(s, folder):
    name = "vertex-massive-fermion"
    (found,) = values(name, folder / name, {"s": s, "m2": "2"}, 1, DIGITS, [(1, 1, 1)]).values()
    point = mp.convert(s), mpf(2)
    compare(found, laurent_coefficients(lambda e: one_loop.on_shell_vertex(e, *point), -1, 1, 38), DIGITS)


@pytest.mark.parametrize(
    "legs",
    [
        ("-1/5", "-1/7", "-1"),  # real z
        ("-3/5", "-6/7", "-1"),  # complex z
        ("-1", "-1/7", "-1"),  # a letter vanishes here at the corner's end of the way only
        pytest.param(("-3", "-1/7", "-1"), marks=pytest.mark.slow),
        pytest.param(("-3", "-1/7", "2"), marks=pytest.mark.slow),
        ("2", "3", "15"),
        pytest.param(("2", "3", "4"), marks=pytest.mark.slow),
        pytest.param(("2", "3", "-5"), marks=pytest.mark.slow),
    ],
)
def test_triangle_with_three_legs(legs, folder):
    name = "triangle-three-legs"
    point = dict(zip(("p1sq", "p2sq", "s"), legs, strict=True))
    found = values(name, folder / name, point, 0, DIGITS)[1, 1, 1]
    compare(found, finite(one_loop.triangle_with_three_legs(*map(mp.convert, legs))), DIGITS)


@pytest.mark.parametrize(
    ("s", "t"),
    [
        ("-3", "-1/3"),
        *(pytest.param(*p, marks=pytest.mark.slow) for p in (("3", "-1"), ("40", "-1"), ("-2", "9"))),
        ("7", "-2"),
        pytest.param("5", "-40", marks=pytest.mark.slow),
    ],
)
def test_massive_box(s, t, folder):
    """Mass 1: Euclidean, between 0 and the threshold, above it, in either channel; with its triangles."""
    name = "box-massive-loop"
    found = values(name, folder / name, {"s": s, "t": t, "m2": "1"}, 0, DIGITS)
    first, second = mp.convert(s), mp.convert(t)
    compare(found[1, 1, 1, 1], finite(one_loop.massive_box(first, second)), DIGITS)
    triangles = {tuple(p): v for p, v in found.items() if sum(p) == 3}
    assert len(triangles) == 2
    for powers, value in triangles.items():
        # lines 1 and 2 meet at p2, lines 2 and 3 at p3: without line 4 (or 2) the massive leg is p2 + p3
        leg = second if 0 in (powers[1], powers[3]) else first
        compare(value, finite(one_loop.massive_triangle(leg)), DIGITS)
