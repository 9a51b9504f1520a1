"""The massless box: canonical system and constants by hand, values against the all-order closed form.

With f = (bubble s, bubble t, box) normalised by the one-loop factor, ``f_s = 1, f_t = x^-eps`` and the box
function f of `closed_forms.box_bracket_euclidean` obeys

    ``f' = -eps f/(x(1+x)) + 2 eps f_t/(x(1+x)) - 2 eps f_s/(1+x)``;

its boundary constant at x -> 0+ is ``2 eps (gamma_E + psi(-eps)) + 2 pi eps cot(pi eps)``.
"""

from fractions import Fraction

import closed_forms as cf
import pytest
from mpmath import mp, mpc, mpf

from ibpred.epsform.form import EpsilonForm
from ibpred.errors import BoundaryError, PointError
from ibpred.exact.rational import ring
from ibpred.iterated.constants.constants import Constant, zeta
from ibpred.numerics.forms.canonical import canonical_system, linear_system
from ibpred.numerics.forms.continuation import evaluate_canonical
from ibpred.numerics.forms.evaluate import evaluate_rows
from ibpred.numerics.forms.masters import integral_row, master_rows, needed_order
from ibpred.numerics.forms.path import Target
from ibpred.numerics.forms.point import kinematic_point

AT_ZERO = ((0, 0, 0), (0, -1, 0), (0, 2, -1))
AT_MINUS_ONE = ((0, 0, 0), (0, 0, 0), (-2, -2, 1))
WEIGHT = 6


def box_constants(weight=WEIGHT):
    """psi(1-eps) + gamma_E = -sum_{n>=2} zeta_n eps^(n-1); pi eps cot(pi eps) = 1 - 2 sum zeta_2k eps^2k."""
    found = []
    for k in range(weight + 1):
        box = Constant.rational(4 if k == 0 else 0)
        if k >= 2:
            box = zeta(k) * (-6 if k % 2 == 0 else -2)
        one = Constant.rational(1 if k == 0 else 0)
        found.append((one, one, box))
    return tuple(found)


def complex_of(ball):
    return mpc(mpf(ball.real.mid().str(60, radius=False)), mpf(ball.imag.mid().str(60, radius=False)))


@pytest.mark.parametrize(
    "target",
    [
        Target(Fraction(1, 3), 0),
        Target(Fraction(22, 7), 0),
        Target(Fraction(1000), 0),
        Target(Fraction(2, 5), 1),
        Target(Fraction(2, 5), -1),
        Target(Fraction(99, 100), 1),
    ],
)
def test_canonical_functions(target):
    system = linear_system((0, -1), (AT_ZERO, AT_MINUS_ONE))
    constants = tuple(tuple(c.ball(200) for c in vector) for vector in box_constants())
    found = evaluate_canonical(system, constants, target, 200)
    with mp.workdps(50):
        x = mpf(target.value.numerator) / target.value.denominator

        def closed(eps):
            if target.half_turns:
                return cf.box_bracket_continued(eps, x, target.half_turns)
            return cf.box_bracket_euclidean(eps, x)

        expected = cf.laurent_coefficients(closed, 0, WEIGHT, 45)
        for k in range(WEIGHT + 1):
            assert abs(complex_of(found[k][2]) - expected[k]) < mpf(10) ** -38
            assert found[k][2].real.rad() < 1e-45


def box_form():
    """I = T f with masters (bubble s, bubble t, box) at -s = 1; f without the one-loop factor."""
    base = ring(("eps", "x"))
    eps, x, one, zero = base.variable("eps"), base.variable("x"), base.one, base.zero
    # bubble = factor / (eps (1 - 2 eps)) f
    bubble = one / (eps * (one - eps * 2))
    transformation = (
        (bubble, zero, zero),
        (zero, bubble, zero),
        (zero, zero, one / (eps * eps * x)),
    )
    inverse = tuple(tuple(one / entry if entry else zero for entry in line) for line in transformation)
    matrices = tuple(tuple(tuple(Fraction(v) for v in row) for row in m) for m in (AT_ZERO, AT_MINUS_ONE))
    return EpsilonForm(("x",), base, (x, x + 1), matrices, transformation, inverse, ((), (), ()))


MASTERS = ((1, 0, 1, 0), (0, 1, 0, 1), (1, 1, 1, 1))
EXPONENTS = tuple((Fraction(a), Fraction(-1)) for a in (0, 0, -2))
SIGNS = {"s": -1, "t": -1}
DIMENSIONS = {"s": 2, "t": 2}


def full_constants():
    """The same with the one-loop factor ``exp(-(1/2) zeta_2 eps^2 - (7/3) zeta_3 eps^3 + ...)`` put in.

    log = eps gamma + log Gamma(1+eps) + 2 log Gamma(1-eps) - log Gamma(1-2 eps)
        = sum_{n>=2} zeta_n eps^n/n ((-1)^n + 2 - 2^n).
    """
    exponent = {n: zeta(n) * Fraction((-1) ** n + 2 - 2**n, n) for n in range(2, WEIGHT + 1)}
    factor = [Constant.rational(1)]
    for n in range(1, WEIGHT + 1):
        # n c_n = sum_k k e_k c_{n-k}
        total = Constant.rational(0)
        for k in range(2, n + 1):
            total = total + exponent[k] * factor[n - k] * Fraction(k, n)
        factor.append(total)
    plain = box_constants()
    return tuple(
        tuple(
            sum((factor[i] * plain[k - i][row] for i in range(k + 1)), Constant.rational(0))
            for row in range(3)
        )
        for k in range(WEIGHT + 1)
    )


@pytest.mark.parametrize(("s", "t"), [(-1, "-1/3"), (-3, "-2/7"), (5, "-2"), (2, "-1/2")])
def test_box_integral(s, t):
    values = {"s": Fraction(s), "t": Fraction(t)}
    point = kinematic_point(values, SIGNS, "s", DIMENSIONS)
    form = box_form()
    x = point.ratios["t"]
    rows = master_rows(form, {"x": x.value}, MASTERS, EXPONENTS)
    assert needed_order(rows, 2) == 4
    results = evaluate_rows(canonical_system(form), full_constants(), 0, rows, x, point.unit, 2, 30, 2000)
    with mp.workdps(45):
        s_, t_ = mpf(values["s"].numerator), mpf(values["t"].numerator) / values["t"].denominator
        log_ms = mp.log(abs(s_)) - (1j * mp.pi if s_ > 0 else 0)
        closed = {
            MASTERS[0]: lambda e: cf.bubble(e, log_ms),
            MASTERS[1]: lambda e: cf.bubble(e, mp.log(-t_)),
            MASTERS[2]: lambda e: cf.box(e, s_, t_),
        }
        for value in results:
            expected = cf.laurent_coefficients(closed[value.powers], -2, 2, 40)
            lowest = -2 if value.powers == MASTERS[2] else -1
            assert sorted(value.epsilon) == list(range(lowest, 3))
            assert value.certified
            for k, ball in value.epsilon.items():
                error = mpf(ball.radius)
                assert abs(mpf(ball.re) - expected[k].real) <= error * (1 + mpf(10) ** -5) + mpf(10) ** -37
                assert abs(mpf(ball.im) - expected[k].imag) <= error * (1 + mpf(10) ** -5) + mpf(10) ** -37
                assert error <= abs(expected[k]) * mpf(10) ** -30


def test_reduction_and_exact_zeros():
    # the box in six dimensions is finite: its combination has no poles, exactly.
    # Box6 ~ st/(2 (s+t)) (d-3)^-1 [Box4 - triangles]; here at unit scale in terms of the masters:
    # eps^2 x Box - 2 eps (1-2 eps) (Bub_s + Bub_t) = f_box - 2 f_s - 2 f_t = O(eps^2)
    values = {"s": Fraction(-1), "t": Fraction(-1, 3)}
    point = kinematic_point(values, SIGNS, "s", DIMENSIONS)
    form = box_form()
    x = point.ratios["t"]
    rows = master_rows(form, {"x": x.value}, MASTERS, EXPONENTS)
    base = ring(("d", "s", "t"))
    d, s, t = (base.variable(name) for name in base.names)
    eps = (-d + 4) / 2
    bubbles = eps * (eps * 2 - 1) * 2 / (s * t)
    row = integral_row(
        (9, 9, 9, 9),
        (Fraction(-2), Fraction(-1)),
        {0: bubbles / eps**4, 1: bubbles / eps**4, 2: base.one / eps**2},
        rows,
        4,
        values,
        Fraction(1),
    )
    (value,) = evaluate_rows(canonical_system(form), full_constants(), 0, [row], x, point.unit, -1, 20, 1000)
    assert sorted(value.epsilon) == [-2, -1]
    assert mp.almosteq(mpf(value.epsilon[-2].re), -3 * (mp.pi**2 + mp.log(3) ** 2), rel_eps=mpf(10) ** -14)


def test_errors():
    form = box_form()
    system = canonical_system(form)
    constants = tuple(tuple(c.ball(80) for c in vector) for vector in box_constants(2))
    with pytest.raises(PointError, match=r"x = -1 lies on a singularity: the letter x \+ 1"):
        evaluate_canonical(system, constants, Target(Fraction(1), 1), 80)
    rows = master_rows(form, {"x": Fraction(1, 3)}, MASTERS, EXPONENTS)
    with pytest.raises(BoundaryError, match="solve through weight 4"):
        evaluate_rows(
            system, box_constants(3), 0, rows, Target(Fraction(1, 3), 0), Target(Fraction(1), 0), 2, 20, 999
        )
    with pytest.raises(PointError, match="basis is singular at x = 0"):
        master_rows(form, {"x": Fraction(0)}, MASTERS, EXPONENTS)
    with pytest.raises(PointError, match="lacks a value for t"):
        kinematic_point({"s": Fraction(1)}, SIGNS, "s", DIMENSIONS)
