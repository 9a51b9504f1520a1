"""Local series: rigour of the remainders, agreement of different ways round, polylogarithms."""

import math
import random
from fractions import Fraction

import flint
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from ibpred.balls.context import complex_ball, precision
from ibpred.errors import PrecisionError
from ibpred.numerics.forms.canonical import CanonicalSystem, Letter, linear_system
from ibpred.numerics.forms.centre import Place, centre_at, centre_at_infinity, centre_at_zero
from ibpred.numerics.forms.continuation import evaluate_canonical, follow
from ibpred.numerics.forms.majorant import tail_factors
from ibpred.numerics.forms.path import Regular, Singular, Step, Target, plan
from ibpred.numerics.forms.series import carried, constants_at, from_base

F = Fraction


def random_system(seed, size=4, points=(0, -1, 2)):
    rng = random.Random(seed)
    matrices = [
        [[rng.choice([0, 0, 1, -2, F(3, 2)]) for _ in range(size)] for _ in range(size)] for _ in points
    ]
    return linear_system(points, matrices)


def random_constants(seed, bits, size=4, orders=4):
    rng = random.Random(seed)
    return tuple(
        tuple(complex_ball(F(rng.randint(-5, 5), 3), F(rng.randint(-2, 2), 7), bits) for _ in range(size))
        for _ in range(orders)
    )


def overlap(left, right):
    return all(a.overlaps(b) for u, v in zip(left, right, strict=True) for a, b in zip(u, v, strict=True))


def widest(orders):
    return max(float(b.real.rad()) + float(b.imag.rad()) for v in orders for b in v)


@settings(deadline=None, max_examples=30)
@given(st.integers(1, 5), st.integers(7, 20), st.fractions(F(1, 20), F(7, 10)))
def test_tail_factors_bound_the_tails(power, terms, ratio):
    # the remainder of log(1/(1-q))^i/i! from q^N on, from the power series itself
    with precision(200):
        q = flint.arb(ratio.numerator) / ratio.denominator
        cap = flint.ctx.cap
        flint.ctx.cap = 100
        try:
            series = flint.arb_series([1, -1]).inv().log() ** power
            coefficients = series.coeffs()
        finally:
            flint.ctx.cap = cap
        tail = sum((c * q**m for m, c in enumerate(coefficients) if m >= terms), flint.arb(0))
        bound = tail_factors(q, terms, power + 1)[power]
        assert tail / flint.arb(power).gamma() / power <= bound


@settings(deadline=None, max_examples=15)
@given(st.integers(0, 10**6), st.sampled_from([(F(1, 3), 0), (F(3, 5), 0), (F(1, 2), 1), (F(6, 5), 0)]))
def test_coarse_balls_hold_the_sharp_values(seed, where):
    # at few bits the series are cut early, so that the remainders matter
    system, target = random_system(seed), Target(*where)
    constants = random_constants(seed, 300)
    coarse = evaluate_canonical(system, constants, target, 24)
    sharp = evaluate_canonical(system, constants, target, 300)
    assert widest(sharp) < 1e-70
    for u, v in zip(coarse, sharp, strict=True):
        assert all(a.contains(b.mid()) for a, b in zip(u, v, strict=True))


@settings(deadline=None, max_examples=10)
@given(st.integers(0, 10**6))
def test_two_homotopic_paths_agree(seed):
    system = random_system(seed)
    constants = random_constants(seed, 200)
    half, target = F(1, 2), Target(F(1), 0)
    short = (
        Step(Singular(F(0), 0), (half, F(0))),
        Step(Regular((F(1), F(0))), (F(1), F(0))),
    )
    long = (
        Step(Singular(F(0), 0), (F(0), half)),
        Step(Regular((half, F(3, 4))), (F(3, 4), F(1))),
        Step(Regular((F(1), F(3, 4))), (F(1), half)),
        Step(Regular((F(1), F(1, 4))), (F(1), F(0))),
    )
    first = follow(system, constants, short, False, 200)
    second = follow(system, constants, long, False, 200)
    third = evaluate_canonical(system, constants, target, 200)
    assert overlap(first, second)
    assert overlap(first, third)
    assert max(map(widest, (first, second, third))) < 1e-40


@settings(deadline=None, max_examples=10)
@given(st.integers(0, 10**6))
def test_matching_undoes_evaluation(seed):
    system = random_system(seed)
    constants = random_constants(seed, 160)
    place = Place(complex_ball(F(1, 4), F(1, 4), 160), complex_ball(F(1, 4), F(1, 4), 160).log())
    centre = centre_at_zero(system, 160)
    back = constants_at(centre, place, from_base(centre, constants, place, 160), 160)
    assert overlap(back, constants)
    other = centre_at_infinity(system, 160)
    values = from_base(other, constants, place, 160)
    away = carried(other, place, values, place, 160)
    assert overlap(away, values)


def test_derivative_satisfies_the_system():
    # finite difference of the values against the right-hand side, an independent check of the recurrences
    system = random_system(5)
    constants = random_constants(5, 400)
    x, step = F(5, 7), F(1, 10**30)
    at = [evaluate_canonical(system, constants, Target(x + k * step, 0), 400) for k in (-1, 0, 1)]
    with precision(400):
        width = complex_ball(2 * step, 0, 400)
        for order in range(1, 4):
            for row in range(4):
                slope = (at[2][order][row] - at[0][order][row]) / width
                expected = flint.acb(0)
                for letter in system.letters:
                    distance = complex_ball(x - letter.root(), 0, 400)
                    for i, entries in letter.rows:
                        if i == row:
                            for j, value in entries:
                                expected += complex_ball(value, 0, 400) * at[1][order - 1][j] / distance
                assert (slope - expected).abs_upper() < 1e-50


@pytest.mark.parametrize("half_turns", [0, 1, -1])
@pytest.mark.parametrize("modulus", [F(1, 5), F(7, 8), F(11, 10), F(5), F(10**6)])
def test_polylogarithms(modulus, half_turns):
    # 1 -> log(1+x) -> -Li2(-x) -> -Li3(-x)
    at_zero = [[0] * 4, [0] * 4, [0, 1, 0, 0], [0, 0, 1, 0]]
    at_minus_one = [[0] * 4, [1, 0, 0, 0], [0] * 4, [0] * 4]
    system = linear_system((0, -1), (at_zero, at_minus_one))
    zero, one = flint.acb(0), flint.acb(1)
    constants = ((one, zero, zero, zero), *[(zero,) * 4] * 3)
    target = Target(modulus, half_turns)
    found = evaluate_canonical(system, constants, target, 150)
    with precision(150):
        x = complex_ball(target.value, 0, 150)
        cut = half_turns and modulus > 1
        log = (-1 - x).log().real if cut else (1 + x).log()
        expected = [flint.acb(log, half_turns * flint.arb.pi()) if cut else log]
        for s in (2, 3):
            value = (-x).polylog(s)
            if cut:
                # Im Li_s(u +- i0) = +- pi log(u)^(s-1)/Gamma(s); u = -x lies below the cut if x lies above
                imaginary = flint.arb.pi() * (-x).log().real ** (s - 1) / flint.arb(s).gamma()
                value = flint.acb(value.real, -half_turns * imaginary)
            expected.append(-value)
        for k in (1, 2, 3):
            assert found[k][k].overlaps(flint.acb(expected[k - 1]))
            assert found[k][k].rel_accuracy_bits() > 110


def test_quadratic_letters():
    # df = eps dlog(1+x^2) f: f = (1+x^2)^eps
    from ibpred.epsform.form import EpsilonForm
    from ibpred.exact.rational import ring
    from ibpred.numerics.forms.canonical import canonical_system

    base = ring(("eps", "x"))
    x = base.variable("x")
    one = ((base.one,),)
    form = EpsilonForm(("x",), base, (x, x * x + 1), (((F(0),),), ((F(1),),)), one, one, ((),))
    system = canonical_system(form)
    assert len(system.letters) == 1
    constants = ((flint.acb(1),), (flint.acb(0),), (flint.acb(0),))
    for target in (Target(F(3, 2), 0), Target(F(3, 2), 1), Target(F(1), -1), Target(F(50), 1)):
        found = evaluate_canonical(system, constants, target, 120)
        with precision(120):
            log = complex_ball(1 + target.modulus**2, 0, 120).log()
            assert found[1][0].overlaps(log)
            assert found[2][0].overlaps(log**2 / 2)
            assert found[2][0].rel_accuracy_bits() > 80


def test_places_outside_the_disc_are_refused():
    system = random_system(1)
    constants = random_constants(1, 64)
    far = Place(flint.acb(1.5), flint.acb(1.5).log())
    with pytest.raises(PrecisionError, match="radius of convergence"):
        from_base(centre_at_zero(system, 64), constants, far, 64)
    with pytest.raises(PrecisionError, match="cannot be told from the centre"):
        centre_at(system, flint.acb(flint.arb(-1, 1e-9)), None, 64)


def test_exact_zeros_stay_exact():
    system = linear_system((0, -1), ([[0, 0], [1, 0]], [[0, 0], [0, 0]]))
    constants = ((flint.acb(0), flint.acb(1)), (flint.acb(1), flint.acb(0)))
    found = evaluate_canonical(system, constants, Target(F(1, 3), 0), 64)
    assert found[0][0].is_zero()
    assert found[1][1].is_zero()
    assert len(plan(system, Target(F(10**9), 0))) == 1  # no letter but 0: one disc reaches everything


@settings(deadline=None, max_examples=25)
@given(
    st.fractions(-4, 4, max_denominator=10),
    st.fractions(F(1, 20), 3, max_denominator=20),
    st.fractions(-3, 3, max_denominator=10).filter(bool),
    st.fractions(F(1, 100), 200, max_denominator=100),
    st.sampled_from([0, 1, -1]),
)
def test_paths_stay_in_their_wedge(real, imaginary, letter, modulus, half_turns):
    # df = eps dlog(((x-r)^2 + i^2)(x-a)) f on the path along the axis, passing a on the target's side
    square = (real**2 + imaginary**2, -2 * real, F(1))
    common = math.lcm(*(c.denominator for c in square))
    one = ((0, ((0, F(1)),)),)
    letters = (
        Letter(tuple(int(c * common) for c in square), one),
        Letter((-letter.numerator, letter.denominator), one),
    )
    target = Target(modulus, half_turns)
    x = target.value
    assume(x != letter)
    system = CanonicalSystem(1, letters)
    found = evaluate_canonical(system, ((flint.acb(1),), (flint.acb(0),)), target, 100)[1][0]
    ratio = 1 - x / letter
    turn = 0
    if ratio < 0:
        turn = -1 if letter > 0 else half_turns
    with precision(100):
        even = complex_ball(letters[0].at(x) / letters[0].at(F(0)), 0, 100).log()
        expected = even + complex_ball(abs(ratio), 0, 100).log() + flint.acb(0, turn * flint.arb.pi())
    assert found.overlaps(expected)
    assert found.real.rad() < 1e-20
