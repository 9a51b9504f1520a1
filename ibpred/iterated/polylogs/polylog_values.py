"""Values of multiple polylogarithms for any complex arguments, as rigorous balls.

``G(a1, ..., an; x) = int_0^x dt/(t - a1) G(a2, ..., an; t)`` along the straight line, with
``G(0, ..., 0; x) = log(x)^n / n!``. The line is cut into pieces (`detours`), on each of which all
contiguous parts of the words are summed at once (`local_words`); Chen's composition of paths puts them
together. Trailing zeros are split off in the first piece, a leading a1 = x in the last one.

References: Goncharov, math/0103059; Borwein, Bradley, Broadhurst, Lisonek, math/9910045; Vollinga,
Weinzierl, hep-ph/0410259.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

import flint

from ibpred.balls.accuracy import bits_for, until_accurate
from ibpred.balls.context import Ball, complex_ball, precision
from ibpred.errors import InputError, PointError
from ibpred.iterated.polylogs.detours import Spot, UnitLetter, cut_path
from ibpred.iterated.polylogs.local_words import LocalWords, local_words, parts_of
from ibpred.iterated.words import Word

_BITS_PER_DIGIT = 12  # ceiling of the working precision


@dataclass(frozen=True)
class Place:
    """An exact complex number, with the side from which it is approached.

    Attributes
    ----------
    real, imaginary
        Exact parts.
    side
        +1 for + i0, -1 for - i0, 0 if nothing is said. For a letter it matters where the letter lies on the
        path of integration; for the end point also on the negative axis, where log x is needed.
    """

    real: Fraction
    imaginary: Fraction = Fraction(0)
    side: int = 0

    def is_zero(self) -> bool:
        """Whether the number is zero."""
        return not self.real and not self.imaginary

    def same_as(self, other: Place) -> bool:
        """Whether two places are the same number."""
        return self.real == other.real and self.imaginary == other.imaginary

    def ball(self, bits: int) -> Ball:
        """The number as a ball."""
        return complex_ball(self.real, self.imaginary, bits)


def polylog(arguments: Sequence[Place], x: Place, digits: int) -> Ball:
    """``G(a1, ..., an; x)`` to a number of digits.

    Parameters
    ----------
    arguments
        a1, ..., an; may be empty.
    x
        The end point, not zero.
    digits
        Digits wanted, relative to the modulus.

    Returns
    -------
    flint.acb
        A ball that holds the value.

    Raises
    ------
    PointError
        If the value is infinite (a1 = x), or an argument lies on the path of integration (or x on the
        negative axis, where log x is needed) and no side is given.
    PrecisionError
        If the digits cannot be reached.
    """
    letters = tuple(dict.fromkeys(arguments))
    word = tuple(letters.index(a) for a in arguments)
    return polylogs((word,), letters, x, digits)[0]


def polylogs(words: Sequence[Word], letters: Sequence[Place], x: Place, digits: int) -> tuple[Ball, ...]:
    """Several words in common letters; see `polylog`. The work on common parts is shared."""
    for word in words:
        if word and letters[word[0]].same_as(x):
            raise PointError(
                f"G with the first argument equal to the end point {_text(x)} is infinite; "
                "use its regularised value"
            )
    return _to_digits(words, letters, x, digits)


def regularised_polylogs(
    words: Sequence[Word], letters: Sequence[Place], x: Place, digits: int
) -> tuple[Ball, ...]:
    """As `polylogs`, with a1 = x allowed: ``G(x; x)`` is set to zero, products are kept (shuffle).

    This is the regularisation with the tangent vector -x at the end point: ``int_0^(x(1-delta)) dt/(t-x)
    = log(delta)`` counts as zero.
    """
    return _to_digits(words, letters, x, digits)


def _to_digits(words: Sequence[Word], letters: Sequence[Place], x: Place, digits: int) -> tuple[Ball, ...]:
    return until_accurate(
        lambda bits: polylog_balls(words, letters, x, bits),
        lambda balls: balls,
        digits,
        bits_for(digits) + 40,
        _BITS_PER_DIGIT * digits + 2000,
    )


def polylog_balls(words: Sequence[Word], letters: Sequence[Place], x: Place, bits: int) -> tuple[Ball, ...]:
    """Values at a working precision; see `regularised_polylogs`.

    Parameters
    ----------
    words, letters, x
        As there.
    bits
        Working precision; the radius of each ball says what it has come to.
    """
    _check(words, letters, x)
    logarithm = _logarithm(words, letters, x, bits)
    return word_balls(words, unit_letters(words, letters, x, bits), logarithm, bits)


def word_balls(
    words: Sequence[Word], letters: Sequence[UnitLetter], logarithm: Ball, bits: int
) -> tuple[Ball, ...]:
    """Iterated integrals from 0 to 1 of words in letters that are given as balls.

    Parameters
    ----------
    words
        Leftmost letter outermost.
    letters
        Distinct letters; those exactly at 0 or 1 are regularised.
    logarithm
        The integral of the single letter 0 from 0 to 1: log x for polylogarithms at x.
    bits
        Working precision.

    Raises
    ------
    PointError, PrecisionError
        As `cut_path`.
    """
    extra = 20 + 4 * max((len(word) for word in words), default=0)
    with precision(bits + extra):
        parts = parts_of(words)
        used = sorted({letter for word in words for letter in word})
        cuts = cut_path([letters[i] for i in used], bits + extra)
        pieces = _expansions(parts, letters, cuts.first, cuts.pieces, cuts.last, logarithm, bits + extra)
        found = []
        for word in words:
            if not word:
                found.append(flint.acb(1))
                continue
            total = None
            for piece in pieces:
                matrix = piece.matrix(word)
                total = matrix if total is None else matrix * total
            assert total is not None
            found.append(total[0, len(word)])
        return tuple(found)


@dataclass(frozen=True)
class _Piece:
    """One expansion and the two points s (with the local logarithm) between which it is used."""

    local: LocalWords
    start: tuple[Ball, Ball] | None  # None: the base point itself
    end: tuple[Ball, Ball] | None

    def matrix(self, word: Word) -> Ball:
        matrix = None if self.end is None else self.local.matrix(word, *self.end)
        if self.start is not None:
            backwards = _inverse(self.local.matrix(word, *self.start))
            matrix = backwards if matrix is None else matrix * backwards
        return matrix


def _inverse(matrix: Ball) -> Ball:
    """Inverse of an upper unitriangular matrix, by back substitution."""
    size = matrix.nrows()
    result = flint.acb_mat(size, size)
    for j in range(size):
        result[j, j] = flint.acb(1)
        for i in range(j - 1, -1, -1):
            total = flint.acb(0)
            for k in range(i + 1, j + 1):
                total -= matrix[i, k] * result[k, j]
            result[i, j] = total
    return result


def _expansions(
    parts: Sequence[Word],
    letters: Sequence[UnitLetter],
    first: Spot,
    middle: Sequence[tuple[Spot, Spot]],
    last: Spot,
    logarithm: Ball,
    bits: int,
) -> list[_Piece]:
    one = flint.acb(1)
    zero = flint.acb(0)
    step = complex_ball(*first, bits)
    start = local_words(parts, _scaled(letters, zero, step, 0), bits)
    pieces = [_Piece(start, None, (one, logarithm + step.log()))]
    for left, right in middle:
        centre = complex_ball((left[0] + right[0]) / 2, (left[1] + right[1]) / 2, bits)
        half = complex_ball((right[0] - left[0]) / 2, (right[1] - left[1]) / 2, bits)
        local = local_words(parts, _scaled(letters, centre, half, None), bits)
        pieces.append(_Piece(local, (-one, zero), (one, zero)))
    step = complex_ball(last[0] - 1, last[1], bits)
    end = local_words(parts, _scaled(letters, one, step, 1), bits)
    pieces.append(_Piece(end, (one, (-step).log()), None))
    return pieces


def _scaled(letters: Sequence[UnitLetter], base: Ball, step: Ball, own: int | None) -> list[Ball | None]:
    return [
        None if own is not None and letter.ball == own else (letter.ball - base) / step for letter in letters
    ]


def unit_letters(
    words: Sequence[Word], letters: Sequence[Place], x: Place, bits: int
) -> tuple[UnitLetter, ...]:
    """The letters divided by the end point, with their sides relative to the path."""
    used = {letter for word in words for letter in word}
    norm = x.real**2 + x.imaginary**2
    found = []
    for index, letter in enumerate(letters):
        # a/x exactly
        real = (letter.real * x.real + letter.imaginary * x.imaginary) / norm
        imaginary = (letter.imaginary * x.real - letter.real * x.imaginary) / norm
        on_path = index in used and imaginary == 0 and 0 < real < 1
        side = _side(letter, x) if on_path else 0
        found.append(UnitLetter(complex_ball(real, imaginary, bits + 64), side))
    return tuple(found)


def _side(letter: Place, x: Place) -> int:
    """Im of (a + i0)/(x + i0) for a letter on the path: a/x is positive."""
    direction = (x.real > 0) - (x.real < 0)
    sides = {s * direction for s in (letter.side, -x.side) if s}
    if not sides or not direction:
        raise PointError(
            f"the argument {_text(letter)} lies on the path of integration from 0 to {_text(x)}: "
            "say on which side it is passed (side = +1 for + i0, -1 for - i0"
            + ("; turn the arguments, as G depends on ratios only)" if not direction else ")")
        )
    if len(sides) > 1:
        raise PointError(
            f"the sides given for the argument {_text(letter)} and the end point {_text(x)} contradict each "
            "other: give one of the two"
        )
    return sides.pop()


def _logarithm(words: Sequence[Word], letters: Sequence[Place], x: Place, bits: int) -> Ball:
    if not any(word and letters[word[-1]].is_zero() for word in words):
        return flint.acb(0)
    with precision(bits + 64):
        if x.imaginary or x.real > 0:
            return x.ball(bits + 64).log()
        if not x.side:
            raise PointError(
                f"log x is needed at {_text(x)} on its branch cut: say from which side "
                "(side = +1 for + i0, -1 for - i0)"
            )
        return flint.acb((-x.ball(bits + 64).real).log(), flint.arb.pi() * x.side)


def _check(words: Sequence[Word], letters: Sequence[Place], x: Place) -> None:
    if x.is_zero():
        raise PointError("a polylogarithm is asked for at x = 0, where it is a limit")
    for i, one in enumerate(letters):
        for other in letters[:i]:
            if one.same_as(other):
                if one.side != other.side:
                    raise PointError(f"the argument {_text(one)} is given with two different sides")
                raise InputError(f"the letter {_text(one)} is listed twice")
    if any(abs(place.side) > 1 for place in (*letters, x)):
        raise InputError("a side is +1, -1 or 0")
    if any(not 0 <= letter < len(letters) for word in words for letter in word):
        raise InputError(f"a word refers to a letter that is not among the {len(letters)} given")


def _text(place: Place) -> str:
    if not place.imaginary:
        return str(place.real)
    sign = "+" if place.imaginary > 0 else "-"
    return f"{place.real} {sign} {abs(place.imaginary)}*I"
