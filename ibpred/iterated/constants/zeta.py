"""Multiple zeta values and alternating Euler sums, by regularised double shuffle relations.

A word ``(a1, ..., an)`` in the letters 0, 1 (and -1) stands for

``int_0^1 dt/(t - a1) int_0^t dt2/(t2 - a2) ...``

regularised with tangent vectors 1 at t = 0 and -1 at t = 1 (log 0 = 0 at both ends). The tables are not
typed in: for each weight the linear system of shuffle products, quasi-shuffle products and Hoffman's
relations (Ihara, Kaneko, Zagier, Compositio Math. 142 (2006) 307; Hoffman, J. Algebra 194 (1997) 477), with
distribution relations for the letter -1 (Broadhurst, hep-th/9604128), is solved over Q. The only inputs
are zeta(2) = pi^2/6, log 2 and the names of the basis elements.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from fractions import Fraction
from functools import cache
from itertools import product
from math import prod
from typing import Any

import flint

from ibpred.errors import BoundaryError
from ibpred.iterated.constants.constants import ZERO, Constant, zeta
from ibpred.iterated.constants.generators import AT_HALF, NAMES, Monomial
from ibpred.iterated.constants.sums import quasi_shuffle
from ibpred.iterated.words import Word, add_scaled, regularised, shuffle

Index = tuple[int, int]
"""(s, sigma): one summation with sigma^n / n^s, sigma = +1 or -1."""

LONGEST_PLAIN = 8
LONGEST_ALTERNATING = 6
"""Weights up to which the generators of `constants` complete a basis."""


def regularised_value(word: Sequence[int]) -> Constant:
    """Exact regularised integral from 0 to 1 of a word in the letters 0, 1, -1.

    Raises
    ------
    BoundaryError
        If the weight is beyond the tables: 8 for the letters 0 and 1, 6 where -1 occurs.
    """
    if not word:
        return Constant.rational(1)
    table = _table(len(word), -1 in word)
    total = ZERO
    for convergent, factor in regularised(word, 1, 0).items():
        total = total + table[convergent] * factor
    return total


@cache
def _table(weight: int, alternating: bool) -> Mapping[Word, Constant]:
    longest = LONGEST_ALTERNATING if alternating else LONGEST_PLAIN
    if weight > longest:
        kind = "alternating sums" if alternating else "multiple zeta values"
        raise BoundaryError(
            f"{kind} of weight {weight} are needed, but exact values are known here only to weight "
            f"{longest}; ask for a lower weight of the solution"
        )
    unknowns = tuple(convergent_words(weight, alternating))
    place = {word: i for i, word in enumerate(unknowns)}
    rows: list[tuple[dict[Word, Fraction], Constant]] = [
        *_basis(weight, alternating),
        *relations(weight, alternating),
    ]
    monomials = sorted({m for _, value in rows for m, _ in value.terms()}, reverse=True)
    columns = {m: len(unknowns) + i for i, m in enumerate(monomials)}
    matrix = flint.fmpq_mat(len(rows), len(unknowns) + len(monomials))
    for r, (left, value) in enumerate(rows):
        for word, factor in left.items():
            matrix[r, place[word]] = flint.fmpq(factor.numerator, factor.denominator)
        for monomial, factor in value.terms():
            matrix[r, columns[monomial]] = flint.fmpq(factor.numerator, factor.denominator)
    reduced, rank = matrix.rref()
    if rank != len(unknowns):
        raise AssertionError(f"double shuffle relations of weight {weight}: rank {rank}, not {len(unknowns)}")
    return {word: _value(reduced, i, monomials, columns) for word, i in place.items()}


def _value(
    reduced: Any, row: int, monomials: Sequence[Monomial], columns: Mapping[Monomial, int]
) -> Constant:
    # full rank in the words: row i is word i = combination of monomials (rref of left = right)
    if reduced[row, row] != 1:
        raise AssertionError("double shuffle relations contradict each other")
    return Constant.from_terms({m: reduced[row, columns[m]] for m in monomials})


def convergent_words(weight: int, alternating: bool) -> Iterator[Word]:
    """Words of one weight that need no regularisation: the first letter is not 1, the last not 0."""
    letters = (0, 1, -1) if alternating else (0, 1)
    for word in product(letters, repeat=weight):
        if word[0] != 1 and word[-1] != 0:
            yield word


def indices_of(word: Sequence[int]) -> tuple[Index, ...]:
    """The nested sum of a word that ends in a nonzero letter: ``I(word) = (-1)^k zeta(indices)``."""
    found: list[Index] = []
    run, last = 1, 1
    for letter in word:
        if letter == 0:
            run += 1
        else:
            found.append((run, letter * last))
            run, last = 1, letter
    return tuple(found)


def word_of(indices: Sequence[Index]) -> Word:
    """The word of a nested sum; inverse of `indices_of`."""
    word: list[int] = []
    last = 1
    for s, sigma in indices:
        last *= sigma
        word += [0] * (s - 1) + [last]
    return tuple(word)


def _as_words(sums: Mapping[tuple[Index, ...], int | Fraction]) -> dict[Word, Fraction]:
    total: dict[Word, Fraction] = {}
    for indices, factor in sums.items():
        add_scaled(total, {word_of(indices): Fraction(factor)}, (-1) ** len(indices))
    return total


def relations(weight: int, alternating: bool) -> Iterator[tuple[dict[Word, Fraction], Constant]]:
    """Relations between convergent words of one weight, with known values of lower weights.

    Yields
    ------
    tuple
        A combination of words and the constant to which it is equal.
    """
    for small in range(1, weight // 2 + 1):
        for left in convergent_words(small, alternating):
            value = regularised_value(left)
            for right in convergent_words(weight - small, alternating):
                known = value * regularised_value(right)
                yield {w: Fraction(c) for w, c in shuffle(left, right).items()}, known
                left_sum, right_sum = indices_of(left), indices_of(right)
                sign = (-1) ** (len(left_sum) + len(right_sum))
                total: dict[Word, Fraction] = {}
                add_scaled(total, _as_words(quasi_shuffle(left_sum, right_sum)), sign)
                yield total, known
    # Hoffman: the divergent words of 1 * v cancel between the two products
    for right in convergent_words(weight - 1, alternating) if weight > 1 else ():
        difference = {w: Fraction(c) for w, c in shuffle((1,), right).items()}
        right_sum = indices_of(right)
        sign = (-1) ** (1 + len(right_sum))
        add_scaled(difference, _as_words(quasi_shuffle(((1, 1),), right_sum)), -sign)
        yield difference, ZERO
    if alternating:
        yield from _distribution(weight)


def _basis(weight: int, alternating: bool) -> Iterator[tuple[dict[Word, Fraction], Constant]]:
    """What is put in by hand: zeta(2), log 2 and the names of the basis elements."""
    if weight == 1:
        if alternating:
            yield {(-1,): Fraction(1)}, Constant.generator("log2")
        return
    if weight == 2:
        yield {(0, 1): Fraction(-1)}, zeta(2)
    elif f"zeta{weight}" in NAMES:
        yield {(0,) * (weight - 1) + (1,): Fraction(-1)}, zeta(weight)
    elif weight == 8:
        yield {(0, 0, 0, 0, 1, 0, 0, 1): Fraction(1)}, Constant.generator("zeta53")
    if alternating:
        for name, indices in AT_HALF.items():
            if sum(indices) == weight:
                yield _at_half(indices), Constant.generator(name)


def _at_half(indices: Sequence[int]) -> dict[Word, Fraction]:
    """The nested sum at 1/2 in words from 0 to 1.

    ``x = t/(1 + t)`` maps [0, 1] to [0, 1/2]: dlog x = dlog t - dlog(1+t), dlog(x-1) = - dlog(1+t).
    """
    choices = [choice for s in indices for choice in [((0, 1), (-1, -1))] * (s - 1) + [((-1, -1),)]]
    words: dict[Word, Fraction] = {}
    for picked in product(*choices):
        sign = prod(factor for _, factor in picked) * (-1) ** len(indices)
        add_scaled(words, {tuple(letter for letter, _ in picked): Fraction(1)}, sign)
    return words


def _distribution(weight: int) -> Iterator[tuple[dict[Word, Fraction], Constant]]:
    # sum over all signs of sigma keeps even n only: sum_sigma zeta(s; sigma) = 2^(k - weight) zeta(s)
    for word in convergent_words(weight, alternating=False):
        indices = indices_of(word)
        total: dict[Word, Fraction] = {}
        for signs in product((1, -1), repeat=len(indices)):
            signed = tuple((s, sigma) for (s, _), sigma in zip(indices, signs, strict=True))
            add_scaled(total, _as_words({signed: 1}), 1)
        add_scaled(total, _as_words({indices: 1}), -(Fraction(2) ** (len(indices) - weight)))
        yield total, ZERO
