from __future__ import annotations

from fractions import Fraction
from itertools import product

import flint
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from mpmath import log, mp, mpc, quad
from mpmath import polylog as classical

from ibpred.balls.context import precision
from ibpred.errors import InputError, PointError
from ibpred.iterated.constants.zeta import regularised_value
from ibpred.iterated.polylogs.polylog_values import Place, polylog, polylogs, regularised_polylogs
from ibpred.iterated.words import shuffle

ZERO, ONE = Place(Fraction(0)), Place(Fraction(1))


def place(re: object, im: object = 0, side: int = 0) -> Place:
    return Place(Fraction(str(re)), Fraction(str(im)), side)


def number(ball: flint.acb) -> mpc:
    return mpc(ball.real.str(110, radius=False), ball.imag.str(110, radius=False))


POINTS = [("1/2", 0), (-3, 0), ("1/4", 2), ("9/10", "1/10"), (5, 1), ("999/1000", 0), ("-1/7", "-20")]


@pytest.mark.parametrize("point", POINTS)
@pytest.mark.parametrize("n", [1, 2, 3, 6])
def test_classical_polylogarithms(point: tuple[object, object], n: int) -> None:
    z = place(*point)
    value = polylog([ZERO] * (n - 1) + [ONE], z, 100)
    with mp.workdps(110):
        exact = mpc(*(mp.mpf(v.numerator) / v.denominator for v in (z.real, z.imaginary)))
        expected = log(1 - exact) if n == 1 else -classical(n, exact)
        assert abs(number(value) - expected) < mp.mpf(10) ** -98 * (1 + abs(expected))


def test_against_iterated_integration() -> None:
    with mp.workdps(25):
        a, b, x = mpc("0.3", "0.4"), mpc("-1.2", "0.5"), mpc("1.1", "-0.7")
        # along t = x u; the inner integral is a logarithm
        expected = quad(lambda u: log(1 - x * u / b) * x / (x * u - a), [0, 0.25, 0.5, 1])
        value = polylog([place("3/10", "4/10"), place("-12/10", "5/10")], place("11/10", "-7/10"), 30)
        assert abs(number(value) - expected) < 1e-20
        tails = polylog([place("3/10", "4/10"), ZERO], place("11/10", "-7/10"), 30)
        expected = quad(lambda u: log(x * u) * x / (x * u - a), [0, 0.01, 0.25, 0.5, 1])
        assert abs(number(tails) - expected) < 1e-17


small = st.fractions(min_value=-3, max_value=3, max_denominator=6)
places = st.builds(Place, small, small)


class TestEveryValueObeys:
    @settings(max_examples=25, deadline=None)
    @given(st.lists(places, min_size=2, max_size=3, unique=True), places, st.data())
    def test_the_shuffle_product(self, letters: list[Place], x: Place, data: st.DataObject) -> None:
        letters = [ZERO, *(a for a in letters if not a.is_zero())]
        assume(not x.is_zero() and (x.imaginary or x.real > 0))
        for a in letters:
            assume(a.is_zero() or (a.real * x.imaginary != a.imaginary * x.real))
        word = st.lists(st.integers(0, len(letters) - 1), min_size=1, max_size=2).map(tuple)
        left, right = data.draw(word), data.draw(word)
        mixed = shuffle(left, right)
        values = polylogs([left, right, *mixed], letters, x, 100)
        with precision(500):
            total = sum((v * n for v, n in zip(values[2:], mixed.values(), strict=True)), flint.acb(0))
            assert total.overlaps(values[0] * values[1])
            assert (total - values[0] * values[1]).abs_upper() < flint.arb(10) ** -95

    @settings(max_examples=15, deadline=None)
    @given(st.lists(places, min_size=1, max_size=3), places, places)
    def test_scaling(self, arguments: list[Place], x: Place, factor: Place) -> None:
        assume(not x.is_zero() and not factor.is_zero() and not arguments[-1].is_zero())
        for a in arguments:
            assume(a.is_zero() or (a.real * x.imaginary != a.imaginary * x.real))

        def scaled(p: Place) -> Place:
            re = p.real * factor.real - p.imaginary * factor.imaginary
            return Place(re, p.real * factor.imaginary + p.imaginary * factor.real)

        one = polylog(arguments, x, 60)
        two = polylog([scaled(a) for a in arguments], scaled(x), 60)
        assert one.overlaps(two)


def test_hoelder_convolution() -> None:
    """math/9910045, section 7: the path 0..1 cut at 1/p, the upper part turned by t -> 1 - t."""
    arguments = [place(0), place("-1/2", "1/3"), place(2, -1), place(-1)]
    cut = place("2/5")
    whole = polylog(arguments, ONE, 80)
    with precision(400):
        total = flint.acb(0)
        for j in range(len(arguments) + 1):
            turned = [Place(1 - a.real, -a.imaginary) for a in reversed(arguments[:j])]
            upper = polylog(turned, Place(1 - cut.real), 80)
            total += (-1) ** j * upper * polylog(arguments[j:], cut, 80)
        assert total.overlaps(whole)


def test_values_at_one_are_the_exact_ones() -> None:
    letters = (ZERO, ONE, place(-1))
    index = {0: 0, 1: 1, -1: 2}
    words = [w for n in (1, 2, 3) for w in product((0, 1, -1), repeat=n)]
    words += [(0, 0, 1, 0, 1), (1, 0, 0, 1, 1, 0), (0, 0, 0, 0, 1, 0, 0, 1), (-1, 0, 1, -1)]
    values = regularised_polylogs([tuple(index[a] for a in w) for w in words], letters, ONE, 110)
    for word, value in zip(words, values, strict=True):
        exact = regularised_value(word).ball(420)
        assert value.overlaps(exact), word


def test_sides_are_limits() -> None:
    """An argument on the path given with a side is the limit of arguments beside the path."""
    gap = Fraction(1, 10**30)
    for x, sign in ((place(2), 1), (place(-2), -1)):
        for side in (1, -1):
            inside = [
                place(sign, 0, side),
                ZERO,
                place("3/2" if sign > 0 else "-3/2", 0, -side),
                place(-sign),
            ]
            beside = [Place(a.real, a.side * gap) for a in inside]
            one, two = polylog(inside, x, 40), polylog(beside, x, 40)
            with precision(200):
                assert (one - two).abs_upper() < flint.arb(10) ** -27


def test_the_side_of_the_end_point() -> None:
    upper = polylog([ONE], place(2, 0, 1), 30)
    assert upper.overlaps(flint.acb(0, -1) * flint.acb.pi())
    assert polylog([place(1, 0, -1)], place(2), 30).overlaps(upper)
    assert polylog([ZERO, place(-1)], place(-3, 0, 1), 30).overlaps(
        polylog([ZERO, place(1, 0, 1)], place(3), 30)
    )
    minus = polylog([ZERO, ZERO], place(-1, 0, -1), 30)
    assert minus.overlaps(-(flint.arb.pi() ** 2) / 2)


def test_letters_very_near_the_path_and_its_ends() -> None:
    tiny = Fraction(1, 10**60)
    value = polylog([Place(Fraction(1, 2), tiny)], ONE, 100)
    with precision(400):
        b = flint.acb(flint.arb(1) / 2, flint.arb(1) / 10**60)
        assert value.overlaps(((1 - b) / (-b)).log())
    value = polylog([Place(1 + tiny), Place(tiny, tiny)], ONE, 60)
    assert value.rel_accuracy_bits() > 190


def test_letters_far_away() -> None:
    """Li2 at tiny arguments: the cut between the two ends is not pushed onto an end."""
    far = place(53 * 53 * 997)
    with mp.workdps(60):
        small = mp.mpf(1) / (53 * 53 * 997)
        assert abs(number(polylog([ZERO, far], ONE, 50)) + classical(2, small)) < mp.mpf(10) ** -50
        # G(b, 0; 1) = Li2(1/b), and the sum of both is a product that vanishes at one
        assert abs(number(polylog([far, ZERO], ONE, 50)) - classical(2, small)) < mp.mpf(10) ** -50


def test_many_digits() -> None:
    value = polylog([ZERO, ZERO, ONE], place("1/2"), 500)
    with precision(1700):
        two = flint.arb(2).log()
        expected = flint.arb(3).zeta() * 7 / 8 - flint.arb.pi() ** 2 * two / 12 + two**3 / 6
        assert value.overlaps(flint.acb(-expected))


def test_what_is_refused() -> None:
    with pytest.raises(PointError, match="infinite"):
        polylog([ONE, ZERO], ONE, 20)
    with pytest.raises(PointError, match="on the path"):
        polylog([ONE], place(2), 20)
    with pytest.raises(PointError, match="branch cut"):
        polylog([ZERO], place(-2), 20)
    with pytest.raises(PointError, match="contradict"):
        polylog([place(1, 0, 1)], place(2, 0, 1), 20)
    with pytest.raises(PointError, match="two different sides"):
        polylog([place(1, 0, 1), place(1, 0, -1)], place(2), 20)
    with pytest.raises(PointError, match="x = 0"):
        polylog([ONE], ZERO, 20)
    with pytest.raises(InputError, match="side"):
        polylog([place(1, 0, 2)], place(2), 20)
