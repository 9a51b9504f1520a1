from __future__ import annotations

from fractions import Fraction
from itertools import product

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ibpred.errors import BoundaryError, PointError
from ibpred.iterated.algebra import (
    combination,
    coproduct,
    derivative,
    rebased,
    reversed_path,
    shuffle_product,
    with_logarithms,
)
from ibpred.iterated.constants.constants import ONE, Constant
from ibpred.iterated.constants.sums import polylog_of_sum, quasi_shuffle, sum_of_polylog
from ibpred.iterated.polylogs.polylog_values import Place, polylog, polylogs
from ibpred.iterated.polylogs.special import exact_polylog

words = st.lists(st.integers(0, 2), min_size=0, max_size=3).map(tuple)
functions = st.dictionaries(words, st.integers(-3, 3), max_size=3).map(combination)
LETTERS = (Place(Fraction(0)), Place(Fraction(-1)), Place(Fraction(2)))


class TestShuffleAlgebra:
    @given(functions, functions, functions)
    def test_is_commutative_and_associative(self, f: dict, g: dict, h: dict) -> None:
        assert shuffle_product(f, g) == shuffle_product(g, f)
        assert shuffle_product(shuffle_product(f, g), h) == shuffle_product(f, shuffle_product(g, h))

    @given(functions, functions)
    def test_derivative_is_a_derivation(self, f: dict, g: dict) -> None:
        whole, left, right = derivative(shuffle_product(f, g)), derivative(f), derivative(g)
        for letter in {*whole, *left, *right}:
            total: dict = {}
            for part in (shuffle_product(left.get(letter, {}), g), shuffle_product(f, right.get(letter, {}))):
                for word, value in part.items():
                    total[word] = total.get(word, 0) + value
            assert combination(total) == whole.get(letter, {})

    @given(functions, functions)
    def test_coproduct_is_multiplicative(self, f: dict, g: dict) -> None:
        """Delta(f g) = Delta(f) Delta(g), compared for all splits at once."""

        def whole(function: dict) -> dict:
            return {k: v for n in range(8) for k, v in coproduct(function, n).items()}

        total: dict = {}
        for (a, b), u in whole(f).items():
            for (c, d), v in whole(g).items():
                for first, m in shuffle_product({a: ONE}, {c: ONE}).items():
                    for second, n in shuffle_product({b: ONE}, {d: ONE}).items():
                        key = first, second
                        total[key] = total.get(key, 0) + u * v * m * n
        assert {k: v for k, v in total.items() if v} == whole(shuffle_product(f, g))

    def test_coproduct_separates_first_entries(self) -> None:
        assert coproduct(combination({(0, 1, 2): 1}), 1) == {((2,), (0, 1)): ONE}


def test_change_of_the_base_point() -> None:
    """Integrals from 0 in terms of integrals from 1, with exact values of the part in between."""
    word = (1, 0, 1)
    x = Fraction(3, 2)
    middle = Fraction(1)
    arguments = [LETTERS[i] for i in word]
    # letters seen from the base point 1, path from 1 to x
    shifted = tuple(Place(a.real - middle) for a in LETTERS)

    def value(inner: tuple[int, ...]) -> Constant:
        return exact_polylog([LETTERS[i].real for i in inner], middle)

    function = rebased(combination({word: 1}), value)
    chosen = sorted(function)
    balls = polylogs([w for w in chosen if w], shifted, Place(x - middle), 40)
    table = dict(zip([w for w in chosen if w], balls, strict=True))
    total = sum(function[w].ball(200) * (table[w] if w else 1) for w in chosen)
    assert polylog(arguments, Place(x), 40).overlaps(total)


def test_reversal_is_an_involution() -> None:
    f = combination({(0, 1): 2, (1,): -1, (): 3})
    assert reversed_path(f) == combination({(1, 0): 2, (1,): 1, (): 3})
    assert reversed_path(reversed_path(f)) == f


def test_logarithms_of_the_tail() -> None:
    log2 = Constant.generator("log2")
    assert with_logarithms((1, 0, 0), 0, log2) == {(1, 0, 0): ONE, (1, 0): log2, (1,): log2**2 / 2}


class TestNestedSums:
    indices = st.lists(
        st.tuples(st.integers(1, 2), st.sampled_from([Fraction(1, 3), Fraction(-1, 2), Fraction(2, 5)])),
        min_size=1,
        max_size=2,
    ).map(tuple)

    @settings(max_examples=12, deadline=None)
    @given(indices, indices)
    def test_stuffle_product_of_values(self, left: tuple, right: tuple) -> None:
        def value(indices: tuple) -> object:
            sign, arguments = polylog_of_sum(indices, Fraction(1), Fraction(0))
            return sign * polylog([Place(a) for a in arguments], Place(Fraction(1)), 60)

        total = sum(count * value(key) for key, count in quasi_shuffle(left, right).items())
        assert (value(left) * value(right)).overlaps(total)

    @given(indices, st.sampled_from([Fraction(1), Fraction(5, 7)]))
    def test_conversion_and_back(self, indices: tuple, x: Fraction) -> None:
        sign, arguments = polylog_of_sum(indices, x, Fraction(0))
        assert sum_of_polylog(arguments, x) == (sign, indices)

    def test_trailing_zeros_are_no_sums(self) -> None:
        with pytest.raises(ValueError, match="trailing"):
            sum_of_polylog((Fraction(1), Fraction(0)), Fraction(1))


SPECIAL = [
    ((0, 1), "1/2"),
    ((0, 0, 1), "1/2"),
    ((-1, 0, 0), "1"),
    ((0, -1, -1, 0), "1"),
    ((0, 3, 0), "3/2"),
    ((2, 2), "1"),
    ((-2, 0), "2"),
    ((0, -3, 0, 0), "3"),
]


@pytest.mark.parametrize(("arguments", "x"), SPECIAL)
def test_exact_values(arguments: tuple[int, ...], x: str) -> None:
    exact_arguments = [Fraction(a) for a in arguments]
    exact = exact_polylog(exact_arguments, Fraction(x))
    assert polylog([Place(a) for a in exact_arguments], Place(Fraction(x)), 50).overlaps(exact.ball(250))


def test_all_words_at_one() -> None:
    for word in product((0, 1, -1), repeat=3):
        if word[0] != 1:
            arguments = [Fraction(a) for a in word]
            exact = exact_polylog(arguments, Fraction(1))
            assert polylog([Place(a) for a in arguments], Place(Fraction(1)), 30).overlaps(exact.ball(150))


@pytest.mark.parametrize("side", [1, -1])
@pytest.mark.parametrize(
    ("arguments", "x"),
    [
        ((1,), "3"),
        ((1, 2), "3"),
        ((2, 1, 2, 1), "3"),
        ((1, 0, 1), "2"),
        ((0, 1, 1, 0), "2"),
        (("1/2", 0, "1/2", 0), "1"),
        ((1, 1, 1), "3"),
    ],
)
def test_arguments_on_the_path(arguments: tuple[int | str, ...], x: str, side: int) -> None:
    exact_arguments = [Fraction(a) for a in arguments]
    exact = exact_polylog(exact_arguments, Fraction(x), side)
    places = [Place(a, Fraction(0), side) for a in exact_arguments]
    assert polylog(places, Place(Fraction(x)), 40).overlaps(exact.ball(200))


def test_the_dilogarithm_at_one_half() -> None:
    """Li2(1/2) = pi^2/12 - log(2)^2/2 (Euler)."""
    assert str(exact_polylog([Fraction(0), Fraction(1)], Fraction(1, 2))) == "-pi^2/12 + log2^2/2"


def test_what_has_no_exact_value() -> None:
    with pytest.raises(PointError, match="on the path"):
        exact_polylog([Fraction(1)], Fraction(2))
    with pytest.raises(PointError, match="infinite"):
        exact_polylog([Fraction(1)], Fraction(1))
    with pytest.raises(BoundaryError, match="not known here"):
        exact_polylog([Fraction(5), Fraction(7), Fraction(11)], Fraction(1))
