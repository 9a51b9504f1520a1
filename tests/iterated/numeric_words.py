"""Slow, plain numerics of iterated integrals for the tests: power series in multiprecision."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from mpmath import mp, mpf


def series_value(roots: Sequence[Fraction | int], x: mpf) -> mpf:
    """``G(a1, ..., an; x)`` for 0 < x well below all nonzero |a|, by summing its Taylor series.

    Trailing zeros are shuffled out by hand: G(0^n; x) = log(x)^n/n!.
    """
    return _with_tail(tuple(Fraction(a) for a in roots), x)


def _with_tail(word: tuple[Fraction, ...], x: mpf) -> mpf:
    zeros = 0
    while zeros < len(word) and word[len(word) - 1 - zeros] == 0:
        zeros += 1
    if zeros == len(word):
        return mp.log(x) ** zeros / mp.factorial(zeros)
    if zeros == 0:
        return _convergent(word, x)
    # 0 ⧢ (w 0^(n-1)) = n w 0^n + insertions of 0 into w, so peel one logarithm at a time
    head, rest = word[: len(word) - zeros], word[len(word) - zeros :]
    total = mp.log(x) * _with_tail(word[:-1], x)
    for place in range(len(head)):
        total -= _with_tail((*head[:place], Fraction(0), *head[place:], *rest[:-1]), x)
    return total / zeros


def _convergent(word: tuple[Fraction, ...], x: mpf) -> mpf:
    length = int(mp.prec / max(-mp.log(abs(x) / min(abs(a) for a in word if a), 2), 0.2)) + 20
    coefficients = [mpf(1)] + [mpf(0)] * length
    for a in reversed(word):
        new = [mpf(0)] * (length + 1)
        if a == 0:
            for n in range(1, length + 1):
                new[n] = coefficients[n] / n
        else:
            # 1/(t - a) = -sum t^m / a^(m+1)
            value = mpf(a.numerator) / a.denominator
            running = mpf(0)
            for n in range(length):
                running = running / value - coefficients[n] / value
                new[n + 1] = running / (n + 1)
        coefficients = new
    return sum(c * x**n for n, c in enumerate(coefficients))


def value_at_one(word: Sequence[int]) -> mpf:
    """A convergent word in 0, 1, -1 from 0 to 1, the path cut at 1/2."""
    half = mpf(1) / 2
    total = mpf(0)
    for cut in range(len(word) + 1):
        outer, inner = word[:cut], word[cut:]
        turned = tuple(1 - a for a in reversed(outer))
        total += (-1) ** len(outer) * _convergent_or_one(turned, half) * _convergent_or_one(inner, half)
    return total


def _convergent_or_one(word: Sequence[int], x: mpf) -> mpf:
    return mpf(1) if not word else _with_tail(tuple(Fraction(a) for a in word), x)
