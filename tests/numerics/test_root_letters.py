"""Series and continuation with square roots, against closed forms and plain integration."""

from fractions import Fraction

import flint
import pytest
from mpmath import mp, mpc, mpf

from ibpred.balls.context import complex_ball, precision
from ibpred.epsform.form import EpsilonForm, OddLetter
from ibpred.errors import PointError
from ibpred.exact.rational import ring
from ibpred.numerics.forms.path import Target
from ibpred.numerics.forms.root_kernels import Kernel, shifted
from ibpred.numerics.forms.rooted_paths import evaluate_rooted, singular_polynomials

F = Fraction
FIELD = ring(("eps", "x", "y"))
X, Y = FIELD.variable("x"), FIELD.variable("y")
BITS = 200


def number(ball):
    return mpc(str(ball.real.mid().str(50, radius=False)), str(ball.imag.mid().str(50, radius=False)))


def close(ball, expected, digits=35):
    assert float(ball.real.rad()) + float(ball.imag.rad()) < 1e-40
    assert abs(number(ball) - expected) <= mpf(10) ** -digits * max(1, abs(expected)), (ball, expected)


def test_kernel_series_and_bound():
    with precision(BITS):
        kernel = Kernel(
            complex_ball(F(2, 3), F(1, 7), BITS),
            1,
            shifted((1, -2, 5), complex_ball(F(1, 2), 1, BITS), BITS),
            (
                (complex_ball(F(1, 3), F(1, 5), BITS), F(1, 2)),
                (complex_ball(F(-1, 2), F(1, 4), BITS), F(-3, 2)),
                (complex_ball(0, F(1, 2), BITS), F(-1)),
                (complex_ball(F(1, 4), 0, BITS), F(2)),
            ),
        )
        scale, radius = flint.arb(1) / 2, flint.arb(3) / 2
        found = kernel.coefficients(scale, 30)
        bound = kernel.bound(radius)
        for m, coefficient in enumerate(found):
            assert not abs(coefficient) > bound * (scale / radius) ** m

    def exact(h):
        c = mpc("0.5", 1) + h
        total = mpc(mpf(2) / 3, mpf(1) / 7) * h * (1 - 2 * c + 5 * c * c)
        total *= mp.sqrt(1 - h * mpc(mpf(1) / 3, mpf(1) / 5)) * (1 - h * mpc(-0.5, 0.25)) ** mpf(-1.5)
        return total / (1 - h * mpc(0, 0.5)) * (1 - h / 4) ** 2

    with mp.workdps(40):
        for m, coefficient in enumerate(mp.taylor(exact, 0, 6)):
            assert abs(number(found[m]) * 2**m - coefficient) < mpf(10) ** -25


def chain_form(radicands, tags, couplings):
    """f1 -> f2 -> ... with one odd letter (P, roots) for each arrow; T is one."""
    size = len(tags)
    one = tuple(tuple(FIELD.constant(int(i == j)) for j in range(size)) for i in range(size))
    matrices = tuple(
        tuple(tuple(F(int(i == k + 1 and j == k)) for j in range(size)) for i in range(size))
        for k in range(len(couplings))
    )
    letters = tuple(OddLetter(p, roots) for p, roots in couplings)
    return EpsilonForm(("x", "y"), FIELD, (), (), one, one, tags, radicands, letters, matrices)


def first_of(size, orders):
    unit = tuple(complex_ball(int(i == 0), 0, BITS) for i in range(size))
    zero = (complex_ball(0, 0, BITS),) * size
    return (unit, *(zero for _ in range(orders)))


def at(x, y):
    return {name: Target(abs(F(v)), 0 if F(v) > 0 else -1) for name, v in (("x", x), ("y", y))}


@pytest.mark.parametrize("x", ["1/9", "3", "1000", "-1/3", "-3", "-7", "-4000"])
def test_logarithm_of_a_letter_with_a_branch_point_at_zero(x):
    # bubble of equal masses: r = sqrt(x (4+x)), below, between and above the thresholds
    form = chain_form((X, X + 4), ((), (0, 1)), [(X, (0, 1))])
    found = evaluate_rooted(form, ("y", "x"), first_of(2, 1), at(x, "1/3"), BITS)
    with mp.workdps(50):
        z = mp.convert(F(x).numerator) / F(x).denominator
        # x - i0, the root positive for positive x
        s = mp.sqrt(z) if z > 0 else mpc(0, -1) * mp.sqrt(-z)
        u = mp.sqrt(z + 4) if z > -4 else mpc(0, -1) * mp.sqrt(-z - 4)
        root = s * u
        # log of (r - x)/(r + x): zero at x = 0
        expected = mp.log((u - s) / (u + s)) if z > -4 else mp.log((s - u) / (s + u)) - mpc(0, -mp.pi)
        close(found[1][1], expected / root)


KALLEN = (1 - X - Y) ** 2 - 4 * X * Y


@pytest.mark.parametrize("y", ["1/50", "2/9", "1/2", "4", "30"])
def test_logarithm_through_zeros_of_the_radicand(y):
    # lambda(1, x, y) at x = 1/9 vanishes at y = 4/9 and 16/9: f/r is analytic there
    form = chain_form((KALLEN,), ((), (0,)), [(1 - X + Y, (0,))])
    found = evaluate_rooted(form, ("y", "x"), first_of(2, 1), at("1/9", y), BITS)
    with mp.workdps(50):
        x, end = mpf(1) / 9, mp.convert(F(y).numerator) / F(y).denominator
        p, root = 1 - x + end, mp.sqrt((1 - x - end) ** 2 - 4 * x * end)
        # the letter begins like y at the corner
        close(found[1][1], mp.log((p - root) / (p + root)) / root)


def test_imaginary_roots():
    # r = i sqrt(y (4+y)): log (r-y)/(r+y) = 2 i atan(y/|r|)
    form = chain_form((-Y, Y + 4), ((), (0, 1)), [(Y, (0, 1))])
    found = evaluate_rooted(form, ("x", "y"), first_of(2, 1), at("1/3", "5/2"), BITS)
    with mp.workdps(45):
        y = mpf(5) / 2
        root = mp.sqrt(y * (4 + y))
        close(found[1][1], 2 * mp.atan(y / root) / root)


def test_nested_integral_against_quadrature():
    # d f3 = dlog w(y) f2 with w = (y - s)/(y + s), s = sqrt(y (4+y)), twice: f3 = log(w/-1)^2/2
    form = chain_form((Y, Y + 4), ((), (0, 1), ()), [(Y, (0, 1)), (Y, (0, 1))])
    found = evaluate_rooted(form, ("x", "y"), first_of(3, 2), at("1/3", "5/2"), BITS)
    with mp.workdps(45):
        y = mpf(5) / 2
        root = mp.sqrt(y * (4 + y))
        close(found[2][2], mp.log((root - y) / (root + y)) ** 2 / 2)
        # two different roots: dlog (x - sqrt(x(4+x)))/(x + ...) is -dx/sqrt(x(4+x))
    mixed = chain_form((X, X + 4), ((), (0, 1), (0,)), [(X, (0, 1)), (X + 2, (1,))])
    found = evaluate_rooted(mixed, ("y", "x"), first_of(3, 2), at("3", "1/3"), BITS)
    with mp.workdps(40):

        def integrand(v):
            # t = v^2; dlog (t+2-u)/(t+2+u) = (t+6)/(u t (t+3)) dt with u = sqrt(t+4)
            u = mp.sqrt(v * v + 4)
            return 2 * (v * v + 6) / (u * (v * v + 3)) * -2 * mp.atanh(v / u) / v

        whole = mp.quad(integrand, [0, 1, mp.sqrt(3)])
        expected = whole / mp.sqrt(3)
        close(found[2][2], expected, 25)


def test_different_ways_round_agree():
    # around a loop of thresholds the masters of the same sheet come back: two corners, one function
    form = chain_form((KALLEN,), ((), (0,)), [(1 - X + Y, (0,))])
    swapped = chain_form((KALLEN,), ((), (0,)), [(1 - Y + X, (0,))])
    for x, y in (("1/9", "5"), ("1/9", "-5"), ("-1/9", "-1/5")):
        one = evaluate_rooted(form, ("y", "x"), first_of(2, 1), at(x, y), BITS)
        other = evaluate_rooted(swapped, ("x", "y"), first_of(2, 1), at(y, x), BITS)
        assert one[1][1].overlaps(other[1][1])


def test_singular_points_are_refused():
    form = chain_form((KALLEN,), ((), (0,)), [(1 - X + Y, (0,))])
    assert {str(p) for p in singular_polynomials(form)} == {str(KALLEN), "y"}
    with pytest.raises(PointError, match="lies on a singularity"):
        evaluate_rooted(form, ("y", "x"), first_of(2, 1), at("1/9", "4/9"), BITS)
