from __future__ import annotations

from fractions import Fraction
from math import comb

from hypothesis import given
from hypothesis import strategies as st

from ibpred.iterated.words import add_scaled, regularised, shuffle, without_head, without_tail

WORDS = st.lists(st.integers(0, 2), max_size=4).map(tuple)


@given(WORDS, WORDS)
def test_shuffle_counts_interleavings_and_commutes(u: tuple[int, ...], v: tuple[int, ...]) -> None:
    product = shuffle(u, v)
    assert sum(product.values()) == comb(len(u) + len(v), len(u))
    assert product == shuffle(v, u)


@given(WORDS, WORDS)
def test_regularisation_respects_the_shuffle_product(u: tuple[int, ...], v: tuple[int, ...]) -> None:
    """reg(u) reg(v) = reg(u ⧢ v): the defining property, with both sides as sums of words."""
    for regularise in (without_head, without_tail):
        left: dict[tuple[int, ...], Fraction] = {}
        for a, x in regularise(u, 1).items():
            for b, y in regularise(v, 1).items():
                add_scaled(left, shuffle(a, b), x * y)
        right: dict[tuple[int, ...], Fraction] = {}
        for word, count in shuffle(u, v).items():
            add_scaled(right, regularise(word, 1), count)
        assert left == right


@given(WORDS)
def test_no_divergent_word_is_left(word: tuple[int, ...]) -> None:
    for kept in regularised(word, 1, 0):
        assert not kept or (kept[0] != 1 and kept[-1] != 0)
