from __future__ import annotations

from fractions import Fraction
from itertools import product
from math import factorial

import flint
import pytest
from mpmath import mp, mpf
from numeric_words import value_at_one

from ibpred.balls.context import precision
from ibpred.errors import BoundaryError
from ibpred.iterated.constants.constants import Constant
from ibpred.iterated.constants.halves import zeta_word_ball
from ibpred.iterated.constants.zeta import (
    LONGEST_ALTERNATING,
    convergent_words,
    indices_of,
    regularised_value,
    relations,
    word_of,
)
from ibpred.iterated.words import shuffle


def nested(*indices: int) -> Constant:
    word = word_of([(s, 1) for s in indices])
    return regularised_value(word) * (-1) ** len(indices)


@pytest.mark.parametrize("weight", range(2, 9))
def test_every_value_lies_in_its_ball(weight: int) -> None:
    for word in convergent_words(weight, alternating=False):
        with precision(90):
            assert zeta_word_ball(word, 90).overlaps(regularised_value(word).ball(90).real), word


@pytest.mark.parametrize("weight", range(1, 5))
def test_alternating_values_against_plain_numerics(weight: int) -> None:
    with mp.workdps(20):
        for word in convergent_words(weight, alternating=True):
            exact = complex(regularised_value(word).ball(80)).real
            assert abs(value_at_one(word) - mpf(exact)) < 1e-14, word


@pytest.mark.parametrize(("weight", "step"), [(5, 9), (6, 40)])
def test_some_alternating_values_of_high_weight(weight: int, step: int) -> None:
    with mp.workdps(20):
        for word in list(convergent_words(weight, alternating=True))[::step]:
            assert abs(value_at_one(word) - mpf(complex(regularised_value(word).ball(80)).real)) < 1e-14, word


def relations_alone(weight: int, alternating: bool) -> int:
    """Numbers of one weight that the relations leave free when nothing is put in: new generators."""
    prime = 2**61 - 1
    words = tuple(convergent_words(weight, alternating))
    place = {word: i for i, word in enumerate(words)}
    rows = [left for left, _ in relations(weight, alternating)]
    matrix = flint.nmod_mat(len(rows), len(words), [0] * (len(rows) * len(words)), prime)
    for r, left in enumerate(rows):
        for word, factor in left.items():
            matrix[r, place[word]] = factor.numerator * pow(factor.denominator, -1, prime)
    return len(words) - int(matrix.rank())


def test_no_relation_is_missing_and_none_is_wrong() -> None:
    """Dimensions d_n = d_(n-2) + d_(n-3) (Zagier), and Fibonacci's with signs (Broadhurst, hep-th/9604128).

    In terms of generators (products taken off): zeta2, zeta3, zeta5, zeta7, zeta(5,3); and with signs
    log2, zeta2, zeta3, then one at weight 4, two at weight 5, two at weight 6.
    """
    assert [relations_alone(w, False) for w in range(2, 9)] == [1, 1, 0, 1, 0, 1, 1]
    assert [relations_alone(w, True) for w in range(2, LONGEST_ALTERNATING + 1)] == [1, 1, 1, 2, 2]


def test_known_families_of_values() -> None:
    assert nested(2, 1) == Constant.read("zeta3")
    assert nested(3, 1) == Constant.read("pi^4/360")
    pi = Constant.generator("pi")
    for n in (1, 2, 3, 4):
        assert nested(*[2] * n) == pi ** (2 * n) * Fraction(1, factorial(2 * n + 1))
    # Zagier's conjecture, proved by Borwein, Bradley, Broadhurst, Lisonek (math/9910045)
    assert nested(3, 1, 3, 1) == pi**8 * Fraction(2, factorial(10))


def test_sum_theorem() -> None:
    """The values of weight w and depth k add up to zeta(w) (Granville, Zagier)."""
    for weight in (5, 6, 7):
        for depth in (2, 3):
            total = Constant.rational(0)
            for s in product(range(1, weight), repeat=depth):
                if sum(s) == weight and s[0] >= 2:
                    total = total + nested(*s)
            assert total == nested(weight)


def test_regularised_values_respect_shuffles() -> None:
    words = [(1,), (0,), (1, 0), (0, 1, 1), (1, 1, 0), (1, 0, 1)]
    for u, v in product(words, words):
        total = Constant.rational(0)
        for word, count in shuffle(u, v).items():
            total = total + regularised_value(word) * count
        assert total == regularised_value(u) * regularised_value(v)


def test_words_and_nested_sums_correspond() -> None:
    for word in convergent_words(4, alternating=True):
        assert word_of(indices_of(word)) == word


def test_weights_beyond_the_tables_are_refused() -> None:
    with pytest.raises(BoundaryError, match="weight 9"):
        regularised_value((0,) * 8 + (1,))
    with pytest.raises(BoundaryError, match="alternating"):
        regularised_value((0,) * 6 + (-1,))
