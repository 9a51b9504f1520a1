"""Polylogarithms at special rational arguments as multiple zeta values and alternating sums."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from ibpred.errors import BoundaryError, PointError
from ibpred.iterated.constants import ONE, ZERO, Constant, log_of
from ibpred.iterated.transport import interval_map
from ibpred.iterated.words import add_scaled
from ibpred.iterated.zeta import regularised_value


def exact_polylog(arguments: Sequence[Fraction], x: Fraction) -> Constant:
    """``G(a1, ..., an; x)`` exactly.

    A Moebius map brings the path to [0, 1] and the letters to 0, 1, -1 (or 0, 1, 2, which a reflection turns
    into these): so go x = 1 with letters 0, 1, -1, x = 1/2 with letters 0, 1, and many more.

    Parameters
    ----------
    arguments, x
        Rational, x positive, no argument inside the path.

    Raises
    ------
    PointError
        If x is not positive, an argument lies inside the path, or a1 = x (the value is infinite).
    BoundaryError
        If no such map is found, or the constants of that weight are not known here.
    """
    shown = f"G({', '.join(map(str, arguments))}; {x})"
    if x <= 0:
        raise PointError(f"{shown}: exact values are given for positive end points; turn the arguments")
    if any(0 < a < x for a in arguments):
        raise PointError(f"{shown}: an argument lies on the path of integration")
    if arguments and arguments[0] == x:
        raise PointError(f"{shown} is infinite")
    chart = interval_map(tuple(dict.fromkeys(arguments)), x, True)
    if chart is None:
        raise BoundaryError(f"{shown} is not known here as a combination of zeta values and alternating sums")
    # dlog(x - a) = dlog(t - image) - dlog(t - pole), one of them absent where it lies at infinity
    total: dict[tuple[Fraction, ...], Fraction] = {(): Fraction(1)}
    for a in arguments:
        grown: dict[tuple[Fraction, ...], Fraction] = {}
        for letter, sign in ((chart.letters[a], 1), (chart.pole, -1)):
            if letter is not None:
                add_scaled(grown, {(*word, letter): value for word, value in total.items()}, sign)
        total = grown
    logarithm = _log(chart.scale, shown) if arguments and arguments[-1] == 0 else ZERO
    found = ZERO
    for word, factor in total.items():
        found = found + _value(word, logarithm) * factor
    return found


def _log(scale: Fraction, shown: str) -> Constant:
    try:
        return log_of(scale)
    except KeyError as error:
        raise BoundaryError(
            f"{shown} needs {error.args[0]}, which is not among the exact constants"
        ) from None


def _value(word: Sequence[Fraction], logarithm: Constant) -> Constant:
    """A word from 0 to 1 whose trailing zeros count as powers of the logarithm."""
    total, power, k = ZERO, ONE, 0
    rest = tuple(int(a) for a in word)
    while True:
        total = total + _regularised(rest) * power
        if not rest or rest[-1] != 0:
            return total
        k += 1
        power = power * logarithm * Fraction(1, k)
        rest = rest[:-1]


def _regularised(word: Sequence[int]) -> Constant:
    if set(word) <= {0, 1, -1}:
        return regularised_value(word)
    # path reversal and t -> 1 - t bring the letters 0, 1, 2 to 1, 0, -1
    sign = -1 if len(word) % 2 else 1
    return regularised_value(tuple(1 - a for a in reversed(word))) * sign
