"""Whole families, from the file to digits, against closed forms."""

from fractions import Fraction

import closed_forms as cf
import pytest
from mpmath import log, mp, mpc, mpf, pi
from solving import compare, values

DIGITS = 30


@pytest.fixture(autouse=True)
def _digits():
    with mp.workdps(50):
        yield


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    return tmp_path_factory.mktemp("store")


def number(text):
    exact = Fraction(text)
    return mpf(exact.numerator) / exact.denominator


def logarithm(text):
    """log(-v - i0)."""
    return mpc(log(abs(number(text))), -pi if Fraction(text) > 0 else 0)


@pytest.mark.parametrize("s", ["-3", "7/2"])
@pytest.mark.parametrize(
    ("name", "closed", "lowest"),
    [("bubble", cf.bubble, -1), ("sunrise", cf.sunrise, -1), ("triangle-one-leg", cf.bubble, -1)],
)
def test_one_scale(name, closed, lowest, s, folder):
    (value,) = values(name, folder / name, {"s": s}, 2, DIGITS).values()
    compare(value, cf.laurent_coefficients(lambda e: closed(e, logarithm(s)), lowest, 2, 38), DIGITS)


@pytest.mark.parametrize(("s", "m2"), [("-3", "2"), ("1", "2")])
def test_one_mass_bubble(s, m2, folder):
    def tadpole(eps):
        return cf.tadpole(eps, number(m2))

    def bubble(eps):
        return cf.one_mass_bubble(eps, number(s), number(m2))

    name = "bubble-one-mass"
    for value in values(name, folder / name, {"s": s, "m2": m2}, 2, DIGITS).values():
        closed = tadpole if sum(value.powers) == 1 else bubble
        compare(value, cf.laurent_coefficients(closed, -1, 2, 38), DIGITS)


@pytest.mark.parametrize(
    ("s", "t"),
    [("-1", "-1/3"), ("1", "-1/3"), ("-2", "-1/3"), ("-1/7", "-40"), ("5", "-2"), ("1", "-99/100")],
)
def test_massless_box(s, t, folder):
    found = values("massless-box", folder / "box", {"s": s, "t": t}, 2, DIGITS)
    closed = {
        (1, 0, 1, 0): lambda e: cf.bubble(e, logarithm(s)),
        (0, 1, 0, 1): lambda e: cf.bubble(e, logarithm(t)),
        (1, 1, 1, 1): lambda e: cf.box(e, number(s), number(t)),
    }
    for powers, function in closed.items():
        compare(found[powers], cf.laurent_coefficients(function, -2, 2, 38), DIGITS)


@pytest.mark.parametrize("s", ["-1", "-3", "2"])
def test_kite_has_no_poles(s, folder):
    # the coefficients of its Gamma-function masters have poles in eps; they cancel, so no pole is printed
    kite = (1, 1, 1, 1, 1)
    (value,) = values("kite", folder / "kite", {"s": s}, 2, DIGITS, [kite]).values()
    assert min(value.epsilon) == 0
    compare(value, cf.laurent_coefficients(lambda e: cf.kite(e, logarithm(s)), 0, 2, 38), DIGITS)


@pytest.mark.parametrize("point", [("-1", "-2/3"), ("-5", "-7/2"), ("3", "-2"), ("3", "2/5")])
def test_triangle_with_two_legs(point, folder):
    name, triangle = "triangle-two-legs", (1, 1, 1)
    where = dict(zip(("s", "p2sq"), point, strict=True))
    (value,) = values(name, folder / name, where, 2, DIGITS, [triangle]).values()
    first, second = map(logarithm, point)
    expected = cf.laurent_coefficients(lambda e: cf.two_leg_triangle(e, first, second), -1, 2, 38)
    compare(value, expected, DIGITS)


DOUBLE_BOX = (1, 1, 1, 1, 1, 1, 1, 0, 0)


@pytest.mark.parametrize("t", ["-1/3", "-22/7"])
def test_planar_double_box_poles(t, folder):
    # Smirnov, hep-ph/9905323
    value = values("planar-double-box", folder / "double", {"s": "-1", "t": t}, -1, DIGITS)[DOUBLE_BOX]
    poles = cf.double_box_poles(-number(t))
    compare(value, {k: mpc(v / -number(t)) for k, v in poles.items()}, DIGITS)


def test_planar_double_box_at_small_x(folder):
    x = Fraction(1, 10**28)
    where = {"s": "-1", "t": str(-x)}
    ball = values("planar-double-box", folder / "double", where, 0, DIGITS)[DOUBLE_BOX].epsilon[0]
    expected = cf.double_box_finite_part_at_small_x(number(str(x))) / number(str(x))
    assert abs(mpf(ball.re) / expected - 1) < mpf(10) ** -22
