"""Polylogarithms at special rational arguments as multiple zeta values and alternating sums."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from fractions import Fraction
from functools import lru_cache, partial
from itertools import pairwise

from ibpred.errors import BoundaryError, PointError
from ibpred.iterated.constants.constants import ONE, ZERO, Constant, log_of
from ibpred.iterated.constants.zeta import regularised_value
from ibpred.iterated.transport import interval_map
from ibpred.iterated.words import add_scaled

Letters = tuple[Fraction, ...]


def exact_polylog(arguments: Sequence[Fraction], x: Fraction, side: int = 0) -> Constant:
    """``G(a1, ..., an; x)`` exactly.

    Parameters
    ----------
    arguments, x
        Rational, x positive.
    side
        Where arguments lie inside the path: +1 if they count as a + i0, -1 for a - i0.

    Raises
    ------
    PointError
        If x is not positive, an argument lies inside the path and no side is given, or a1 = x (the value is
        infinite).
    BoundaryError
        If the value is not known here as a combination of zeta values and alternating sums.
    """
    shown = f"G({', '.join(map(str, arguments))}; {x})"
    if x <= 0:
        raise PointError(f"{shown}: exact values are given for positive end points; turn the arguments")
    if arguments and arguments[0] == x:
        raise PointError(f"{shown} is infinite")
    letters = tuple(a / x for a in arguments)
    logarithm = _log(x) if letters and letters[-1] == 0 else ZERO
    return _with_ends(letters, lambda core: exact_word(core, side), Fraction(1), ZERO, logarithm)


@lru_cache(maxsize=65536)
def exact_word(word: Letters, side: int) -> Constant:
    """Regularised integral of a word in rational letters from 0 to 1.

    The path is cut at the letters that lie on it and passes them by half turns. A Moebius map brings each
    piece to [0, 1] and its letters to 0, 1, -1 (or 0, 1, 2, which a reflection turns into these).

    Parameters
    ----------
    word
        The letters a of ``dt/(t - a)``, leftmost outermost. The tangent vectors are 1 at t = 0 and -1 at
        t = 1.
    side
        As for `exact_polylog`.

    Raises
    ------
    PointError, BoundaryError
        As for `exact_polylog`.
    """
    inside = sorted({a for a in word if 0 < a < 1})
    if inside and not side:
        raise PointError(
            f"the argument {inside[0]} (for the end point 1) lies on the path of integration: say on which "
            "side it is passed"
        )
    half_turn = Constant.generator("I") * Constant.generator("pi") * side
    corners = [Fraction(0), *inside, Fraction(1)]
    # values of all tails of the word along the path so far
    tails = [ZERO] * len(word) + [ONE]
    for start, end in pairwise(corners):
        if start:
            tails = _continued(word, tails, partial(_turn, at=start, half_turn=half_turn))
        tails = _continued(word, tails, partial(_piece, start=start, end=end))
    return tails[0]


def _continued(
    word: Letters, tails: Sequence[Constant], value: Callable[[Letters], Constant]
) -> list[Constant]:
    """Composition of paths: ``sum_(w = v u) value(v) tail(u)`` for every tail of the word."""
    size = len(word)
    found = []
    for i in range(size + 1):
        total = ZERO
        for j in range(i, size + 1):
            if tails[j]:
                total = total + value(word[i:j]) * tails[j]
        found.append(total)
    return found


def _turn(part: Letters, at: Fraction, half_turn: Constant) -> Constant:
    """Half a turn around a letter."""
    value = ONE
    for k, a in enumerate(part, start=1):
        if a != at:
            return ZERO
        value = value * half_turn * Fraction(1, k)
    return value


def _piece(part: Letters, start: Fraction, end: Fraction) -> Constant:
    """A straight piece without letters inside, with tangent vectors 1 and -1 at its ends."""
    if not part:
        return ONE
    length = end - start
    if len(part) == 1:
        # tangent vectors: the distance from an end at which the letter lies counts as one
        one = Fraction(1)
        return _log(abs((end - part[0] or one) / (start - part[0] or one)))
    local = tuple((a - start) / length for a in part)
    chart = interval_map(tuple(dict.fromkeys(local)), Fraction(1), True)
    if chart is None:
        raise BoundaryError(
            f"the iterated integral of {', '.join(map(str, part))} from {start} to {end} is not known here "
            "as a combination of zeta values and alternating sums"
        )
    # dlog(x - a) = dlog(t - image) - dlog(t - pole), one of them absent where it lies at infinity
    total: dict[Letters, Fraction] = {(): Fraction(1)}
    for a in local:
        grown: dict[Letters, Fraction] = {}
        for letter, sign in ((chart.letters[a], 1), (chart.pole, -1)):
            if letter is not None:
                add_scaled(grown, {(*word, letter): value for word, value in total.items()}, sign)
        total = grown
    head = -_log(chart.end_scale * length) if any(word[0] == 1 for word in total) else ZERO
    tail = _log(chart.scale * length) if any(word[-1] == 0 for word in total) else ZERO
    found = ZERO
    for word, factor in total.items():
        found = found + _with_ends(word, _regularised, Fraction(1), head, tail) * factor
    return found


def _with_ends(
    word: Letters, value: Callable[[Letters], Constant], top: Fraction, head: Constant, tail: Constant
) -> Constant:
    """A word whose leading letters `top` and trailing zeros count as powers of given numbers."""
    total, left = ZERO, ONE
    for k in range(len(word) + 1):
        if k:
            if not head or word[k - 1] != top:
                break
            left = left * head * Fraction(1, k)
        rest, right = word[k:], left
        for j in range(len(rest) + 1):
            if j:
                if not tail or rest[-j] != 0:
                    break
                right = right * tail * Fraction(1, j)
            total = total + value(rest[: len(rest) - j]) * right
    return total


def _log(scale: Fraction) -> Constant:
    try:
        return log_of(scale)
    except KeyError as error:
        raise BoundaryError(
            f"a polylogarithm at rational arguments needs {error.args[0]}, which is not among the exact "
            "constants"
        ) from None


def _regularised(word: Letters) -> Constant:
    letters = tuple(int(a) for a in word)
    if set(letters) <= {0, 1, -1}:
        return regularised_value(letters)
    # path reversal and t -> 1 - t bring the letters 0, 1, 2 to 1, 0, -1
    sign = -1 if len(letters) % 2 else 1
    return regularised_value(tuple(1 - a for a in reversed(letters))) * sign
