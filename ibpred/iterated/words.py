"""Words in letters, the shuffle product and shuffle regularisation.

A word ``(l1, ..., ln)`` stands for the iterated integral

``I(l1, ..., ln; x) = int_0^x dlog(t - a_l1) I(l2, ..., ln; t)``

so the leftmost letter is integrated last (outermost). Integrals start at the tangential base point
x = 0 with tangent vector 1: ``I(0^n; x) = log(x)^n / n!`` where 0 is the letter x itself.
"""

from __future__ import annotations

from collections.abc import Hashable, Mapping, Sequence
from fractions import Fraction
from functools import lru_cache
from typing import TypeVar

L = TypeVar("L", bound=Hashable)
Word = tuple[int, ...]
"""Letters by index, leftmost = outermost integration."""


def shuffle(left: Sequence[L], right: Sequence[L]) -> dict[tuple[L, ...], int]:
    """Shuffle product of two words: all interleavings with their multiplicities.

    ``I_u(x) I_v(x) = sum_w shuffle(u, v)[w] I_w(x)`` (Ree's theorem for Chen's iterated integrals).
    """
    return dict(_shuffle(tuple(left), tuple(right)))


@lru_cache(maxsize=65536)
def _shuffle(left: tuple[L, ...], right: tuple[L, ...]) -> tuple[tuple[tuple[L, ...], int], ...]:
    if not left or not right:
        return ((left + right, 1),)
    total: dict[tuple[L, ...], int] = {}
    for rest, first in ((_shuffle(left[1:], right), left[0]), (_shuffle(left, right[1:]), right[0])):
        for word, count in rest:
            key = (first, *word)
            total[key] = total.get(key, 0) + count
    return tuple(total.items())


def without_head(word: Sequence[L], letter: L) -> dict[tuple[L, ...], Fraction]:
    """Shuffle-regularise a word with leading letters `letter`, whose single integral is set to zero.

    Returns
    -------
    dict
        Words that do not start with `letter`, with coefficients, whose sum is the regularised value;
        empty for a nonempty word made of `letter` only.
    """
    word = tuple(word)
    heads = 0
    while heads < len(word) and word[heads] == letter:
        heads += 1
    if heads == 0:
        return {word: Fraction(1)}
    body = word[heads:]
    if not body:
        return {}
    # letter ⧢ (letter^(h-1) body) = h letter^h body + insertions behind the first letter of body
    total: dict[tuple[L, ...], Fraction] = {}
    for cut in range(1, len(body) + 1):
        inserted = (letter,) * (heads - 1) + body[:cut] + (letter,) + body[cut:]
        for key, value in without_head(inserted, letter).items():
            total[key] = total.get(key, Fraction(0)) - value / heads
    return {key: value for key, value in total.items() if value}


def without_tail(word: Sequence[L], letter: L) -> dict[tuple[L, ...], Fraction]:
    """As `without_head`, for trailing letters."""
    turned = without_head(tuple(reversed(tuple(word))), letter)
    return {tuple(reversed(key)): value for key, value in turned.items()}


def regularised(word: Sequence[L], head: L, tail: L) -> dict[tuple[L, ...], Fraction]:
    """Shuffle-regularise both ends: no word of the result starts with `head` or ends with `tail`."""
    total: dict[tuple[L, ...], Fraction] = {}
    for middle, first in without_tail(word, tail).items():
        for key, second in without_head(middle, head).items():
            total[key] = total.get(key, Fraction(0)) + first * second
    return {key: value for key, value in total.items() if value}


def add_scaled(target: dict[L, Fraction], source: Mapping[L, Fraction | int], factor: Fraction | int) -> None:
    """``target += factor * source`` for sparse sums, dropping zeros."""
    for key, value in source.items():
        new = target.get(key, Fraction(0)) + factor * value
        if new:
            target[key] = new
        else:
            target.pop(key, None)
