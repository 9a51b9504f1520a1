"""Regularised limits of iterated integrals whose letters depend on a variable that tends to zero.

``M(b1, ..., bn)`` is the iterated integral of ``dt/(t - b1) ... dt/(t - bn)`` from 0 to 1 (leftmost
outermost) with tangent vectors 1 at t = 0 and -1 at t = 1. As z -> 0+ letters may run into the ends of the
path. Then

``M(w) -> sum_(w = u m v) E(u) M(m) S(v)``

up to powers of z, with S the part of the path on which t is as small as the small letters, and E likewise at
t = 1 (composition of paths; Chen). Logarithms of z count as zero throughout.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction

from ibpred.exact.rational import Polynomial, Rational

UnitWord = tuple[tuple[Rational, ...], int]
"""Letters b of M(b1, ..., bn), and the side of those inside the path: b + i0, b - i0, or none (0)."""

Products = dict[tuple[UnitWord, ...], Fraction]
"""Products of unit words -> coefficient, without zeros."""


def order_at_zero(value: Rational, variable: str) -> int:
    """Order of vanishing at zero of a nonzero function (negative: a pole)."""
    place = value.ring.index(variable)
    return _lowest(value.numerator, place) - _lowest(value.denominator, place)


def leading_coefficient(value: Rational, variable: str, order: int) -> Rational:
    """What multiplies ``variable^order`` in a function of that order or a higher one."""
    return (value / value.ring.variable(variable) ** order).substitute({variable: 0})


def limit_of_word(letters: Sequence[Rational], side: int, variable: str) -> Products:
    """The regularised limit of a unit word as the variable tends to zero.

    Parameters
    ----------
    letters, side
        The word.
    variable
        Tends to zero from above.

    Returns
    -------
    dict
        Products of words whose letters are free of the variable; empty for zero.
    """
    if any(b and order_at_zero(b, variable) < 0 for b in letters):
        return {}
    ends = [leading_coefficient(b, variable, 0) for b in letters]
    count = len(letters)
    total: Products = {}
    for i in range(count + 1):
        if i and not ends[i - 1].is_one():
            break
        # 1 - t in place of t, and the path run backwards
        mirrored = tuple(1 - b for b in reversed(letters[:i]))
        last = _scaled(_start(mirrored, -side, variable), (-1) ** i)
        for j in range(count, i - 1, -1):
            if j < count and ends[j]:
                break
            words: tuple[UnitWord, ...] = ((tuple(ends[i:j]), side),) if j > i else ()
            middle = {words: Fraction(1)}
            first = _start(letters[j:], side, variable)
            _accumulate(total, _product(_product(last, middle), first))
    return total


def _start(letters: Sequence[Rational], side: int, variable: str) -> Products:
    """From t = 0 up to where all letters, which tend to zero, are small against t."""
    if not letters:
        return {(): Fraction(1)}
    orders = [order_at_zero(b, variable) for b in letters if b]
    if not orders:
        return {}
    least = min(orders)
    scaled = [leading_coefficient(b, variable, least) for b in letters]
    total: Products = {}
    for j in range(len(letters), -1, -1):
        if j < len(letters) and scaled[j]:
            break
        _accumulate(total, _product(_to_infinity(scaled[:j], side), _start(letters[j:], side, variable)))
    return total


def _to_infinity(letters: Sequence[Rational], side: int) -> Products:
    """From s = 0 to infinity, where log s counts as zero too: ``s = t/(1 - t)`` turns it into unit words."""
    if not letters:
        return {(): Fraction(1)}
    one = letters[0].ring.one
    words: dict[tuple[Rational, ...], Fraction] = {(): Fraction(1)}
    for b in letters:
        grown: dict[tuple[Rational, ...], Fraction] = {}
        for word, value in words.items():
            if b + 1:
                _add(grown, (*word, b / (b + 1)), value)
            _add(grown, (*word, one), -value)
        words = grown
    return {((word, side),): value for word, value in words.items()}


def _add(target: dict[tuple[Rational, ...], Fraction], word: tuple[Rational, ...], value: Fraction) -> None:
    total = target.get(word, Fraction(0)) + value
    if total:
        target[word] = total
    else:
        target.pop(word, None)


def _lowest(polynomial: Polynomial, place: int) -> int:
    return min(int(exponents[place]) for exponents in polynomial.monoms())


def _scaled(terms: Products, factor: int) -> Products:
    return {key: value * factor for key, value in terms.items()}


def _product(left: Mapping[tuple[UnitWord, ...], Fraction], right: Products) -> Products:
    return {a + b: x * y for a, x in left.items() for b, y in right.items()}


def _accumulate(target: Products, source: Products) -> None:
    for key, value in source.items():
        total = target.get(key, Fraction(0)) + value
        if total:
            target[key] = total
        else:
            target.pop(key, None)
