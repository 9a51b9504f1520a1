"""Combinations of words: products, derivative, composition of paths, coproduct.

A combination maps words (leftmost letter outermost) to coefficients; it stands for a sum of iterated
integrals of ``dlog(letter)`` from one base point along one path.
"""

from __future__ import annotations

from collections.abc import Callable, Hashable, Mapping, Sequence
from fractions import Fraction
from typing import TypeVar

from ibpred.iterated.constants.constants import ONE, ZERO, Constant
from ibpred.iterated.words import shuffle

L = TypeVar("L", bound=Hashable)

Combination = dict[tuple[L, ...], Constant]
"""Word -> coefficient, without zeros."""


def combination(terms: Mapping[tuple[L, ...], Constant | Fraction | int]) -> Combination[L]:
    """A combination from any exact coefficients; zeros are dropped."""
    found = {word: value if isinstance(value, Constant) else ONE * value for word, value in terms.items()}
    return {word: value for word, value in found.items() if value}


def add(target: Combination[L], word: tuple[L, ...], value: Constant) -> None:
    """``target += value * word``."""
    total = target.get(word, ZERO) + value
    if total:
        target[word] = total
    else:
        target.pop(word, None)


def shuffle_product(
    left: Mapping[tuple[L, ...], Constant], right: Mapping[tuple[L, ...], Constant]
) -> Combination[L]:
    """Product of two functions: every pair of words is shuffled."""
    total: Combination[L] = {}
    for u, a in left.items():
        for v, b in right.items():
            for word, count in shuffle(u, v).items():
                add(total, word, a * b * count)
    return total


def derivative(function: Mapping[tuple[L, ...], Constant]) -> dict[L, Combination[L]]:
    """``d f = sum_l dlog(l) f_l``: each letter l that occurs outermost -> f_l."""
    found: dict[L, Combination[L]] = {}
    for word, value in function.items():
        if word:
            add(found.setdefault(word[0], {}), word[1:], value)
    return {letter: inner for letter, inner in found.items() if inner}


def coproduct(
    function: Mapping[tuple[L, ...], Constant], first: int
) -> dict[tuple[tuple[L, ...], tuple[L, ...]], Constant]:
    """The (first, n - first) part of the coproduct of every word of length n >= first.

    For iterated integrals in independent constant letters this is deconcatenation. The left factor holds the
    innermost letters (first entries: discontinuities act on it), the right factor the outermost ones
    (derivatives act on it).

    Parameters
    ----------
    function
        The combination.
    first
        Weight of the left factors.
    """
    found: dict[tuple[tuple[L, ...], tuple[L, ...]], Constant] = {}
    for word, value in function.items():
        if len(word) >= first:
            cut = len(word) - first
            key = (word[cut:], word[:cut])
            found[key] = found.get(key, ZERO) + value
    return {key: value for key, value in found.items() if value}


def rebased(
    function: Mapping[tuple[L, ...], Constant], value: Callable[[tuple[L, ...]], Constant]
) -> Combination[L]:
    """The same function in iterated integrals from another base point.

    ``I_w(a -> x) = sum_(w = v u) I_v(b -> x) I_u(a -> b)``.

    Parameters
    ----------
    function
        In integrals from a.
    value
        Gives ``I_u(a -> b)`` for each word u, regularised where a or b is a singular point (with the
        tangent vectors that the integrals from b shall refer to).
    """
    total: Combination[L] = {}
    known: dict[tuple[L, ...], Constant] = {(): ONE}
    for word, coefficient in function.items():
        for cut in range(len(word) + 1):
            inner = word[cut:]
            if inner not in known:
                known[inner] = value(inner)
            add(total, word[:cut], coefficient * known[inner])
    return total


def reversed_path(function: Mapping[tuple[L, ...], Constant]) -> Combination[L]:
    """The same integrals along the path run backwards: words reversed, sign (-1)^length."""
    total: Combination[L] = {}
    for word, value in function.items():
        add(total, tuple(reversed(word)), value * (-1) ** len(word))
    return total


def with_logarithms(word: Sequence[L], letter: L, logarithm: Constant) -> Combination[L]:
    """Undo a tail regularisation: trailing `letter` with integral `logarithm` instead of zero.

    ``I_(u l^z) = sum_k reg(u l^(z-k)) logarithm^k / k!``: the result maps words with their tail to be
    regularised to zero to coefficients.
    """
    word = tuple(word)
    total: Combination[L] = {}
    factor = ONE
    for k in range(len(word) + 1):
        if k:
            if word[len(word) - k] != letter:
                break
            factor = factor * logarithm * Fraction(1, k)
        add(total, word[: len(word) - k], factor)
    return total
