"""All words at once near one base point: power series with rigorous tails.

Around a base point let ``t = base + h s`` and let the letters sit at s = beta. A word is written
``F_W(s) = sum_k R_W'(s) L^k / k!`` where W' is W without its last k letters, all of them at the base point,
and L is the integral of that single letter. The regularised parts R are analytic,

``dR_W/ds = R_tail/(s - beta_head) - [last letter at the base point] R_(W without last)/s``,

so one recurrence gives every contiguous part of a word, and Cauchy's estimate on a circle bounds the tails.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import ceil, log2

import flint

from ibpred.balls.context import Ball, RealBall
from ibpred.errors import PrecisionError
from ibpred.iterated.words import Word

_CIRCLE = Fraction(63, 64)  # circle of the estimate, in units of the distance of the nearest letter


@dataclass(frozen=True)
class LocalWords:
    """Integrals of words from a base point, ready to be evaluated at ``|s| <= 1``.

    Attributes
    ----------
    base_letter
        The letter at the base point; -1 where there is none.
    series
        Taylor coefficients of R for each word (without the tail).
    tails
        Bounds of the tails at ``|s| <= 1``.
    """

    base_letter: int
    series: Mapping[Word, Sequence[Ball]]
    tails: Mapping[Word, RealBall]

    def matrix(self, word: Word, s: Ball, logarithm: Ball) -> Ball:
        """Upper unitriangular `flint.acb_mat`: entry (i, j) is the integral of ``word[i:j]`` up to s.

        Parameters
        ----------
        word
            All of its contiguous parts must be known.
        s
            Where, ``|s| <= 1``.
        logarithm
            L at s.
        """
        size = len(word) + 1
        powers = [flint.acb(1)]
        for k in range(1, size):
            powers.append(powers[-1] * logarithm / k)
        values: dict[Word, Ball] = {}
        result = flint.acb_mat(size, size)
        for i in range(size):
            for j in range(i, size):
                part = word[i:j]
                total = flint.acb(0)
                for k in range(len(part) + 1):
                    if k and part[len(part) - k] != self.base_letter:
                        break
                    shorter = part[: len(part) - k]
                    if shorter not in values:
                        values[shorter] = self._value(shorter, s)
                    total += values[shorter] * powers[k]
                result[i, j] = total
        return result

    def _value(self, word: Word, s: Ball) -> Ball:
        coefficients = self.series[word]
        total = flint.acb(0)
        if s == 1:
            for c in coefficients:
                total += c
        else:
            for c in reversed(coefficients):
                total = total * s + c
        tail = self.tails[word]
        if tail.is_zero():
            return total
        margin = flint.arb(0, tail.upper())
        return total + flint.acb(margin, margin)


def parts_of(words: Iterable[Word]) -> list[Word]:
    """All contiguous parts of the words, by length; the empty word first."""
    found = {word[i:j] for word in words for i in range(len(word) + 1) for j in range(i, len(word) + 1)}
    return sorted(found | {()}, key=lambda w: (len(w), w))


def local_words(parts: Sequence[Word], betas: Sequence[Ball | None], bits: int) -> LocalWords:
    """Expand words about a base point, at the current working precision.

    Parameters
    ----------
    parts
        Words closed under dropping the first or the last letter, shorter ones first.
    betas
        Position of each letter in s; None for the letter at the base point.
    bits
        Tails are at most about ``2^-bits``.

    Raises
    ------
    PrecisionError
        If a letter may lie within the unit disc.
    """
    used = {letter for word in parts for letter in word}
    base = next((i for i in used if betas[i] is None), -1)
    apart: dict[int, Ball] = {i: beta for i, beta in enumerate(betas) if beta is not None and i in used}
    distances = {i: beta.abs_lower() for i, beta in apart.items()}
    series: dict[Word, list[Ball]] = {}
    if not distances:
        tails = {word: flint.arb(0) for word in parts}
        # only the letter at the base point: nothing but logarithms
        for word in parts:
            series[word] = [] if word else [flint.acb(1)]
        return LocalWords(base, series, tails)
    radius = min(distances.values()) * flint.arb(_CIRCLE.numerator) / _CIRCLE.denominator
    if not radius > 1:
        raise PrecisionError(
            "a letter is too close to a base point to tell them apart at the working precision; "
            "raise the working precision"
        )
    bounds = _bounds(parts, base, distances, radius)
    largest = max((b for w, b in bounds.items() if w), key=lambda b: float(b.log()), default=flint.arb(1))
    gain = max(float(radius.log()) / 0.6931471805599453, 1e-3)
    length = ceil(max(bits + float((largest + 1).log()) * 1.4427 - log2(min(gain, 1.0)), 4.0) / gain) + 2
    # sum over n >= length of B r^-n
    geometric = radius ** (-length) / (1 - 1 / radius)
    tails = {word: (bounds[word] * geometric if word else flint.arb(0)) for word in parts}
    inverses = {i: 1 / beta for i, beta in apart.items()}
    reciprocals = [flint.arb(0), *(flint.arb(1) / n for n in range(1, length))]
    for word in parts:
        series[word] = _integrated(word, base, series, inverses, reciprocals)
    return LocalWords(base, series, tails)


def _bounds(
    parts: Sequence[Word], base: int, distances: Mapping[int, RealBall], radius: RealBall
) -> dict[Word, RealBall]:
    """Bounds of |R| on the disc ``|s| <= radius``: |R(s)| <= |s| max |R'|, the maximum on the circle."""
    bounds: dict[Word, RealBall] = {}
    for word in parts:
        if not word:
            bounds[word] = flint.arb(1)
            continue
        if all(letter == base for letter in word):
            bounds[word] = flint.arb(0)
            continue
        slope = bounds[word[1:]]
        if word[0] != base:
            slope = slope * radius / (distances[word[0]] - radius)
        if word[-1] == base:
            slope = slope + bounds[word[:-1]]
        bounds[word] = slope.upper()
    return bounds


def _integrated(
    word: Word,
    base: int,
    series: Mapping[Word, Sequence[Ball]],
    inverses: Mapping[int, Ball],
    reciprocals: Sequence[RealBall],
) -> list[Ball]:
    """Taylor coefficients of R for one word from those of its shorter parts."""
    length = len(reciprocals)
    zero = flint.acb(0)
    if not word:
        return [flint.acb(1)]
    if all(letter == base for letter in word):
        return []
    tail = series[word[1:]]
    last = series[word[:-1]] if word[-1] == base else ()
    found = [zero] * length
    if word[0] == base:
        for n in range(1, length):
            value = tail[n] if n < len(tail) else zero
            if n < len(last):
                value = value - last[n]
            found[n] = value * reciprocals[n]
        return found
    inverse = inverses[word[0]]
    running = zero
    short, few = len(tail), len(last)
    for n in range(1, length):
        # q = f/(s - beta): q_m = (q_(m-1) - f_m)/beta
        running = (running - tail[n - 1] if n <= short else running) * inverse
        found[n] = (running - last[n] if n < few else running) * reciprocals[n]
    return found
