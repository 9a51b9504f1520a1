"""Raise the working precision until results are as sharp as wanted."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from typing import TypeVar

import flint

from ibpred.balls.context import Ball, precision
from ibpred.errors import PrecisionError

T = TypeVar("T")

_BITS_PER_DIGIT = 3.3219280948873626


def bits_for(digits: int) -> int:
    """Bits that hold `digits` decimal digits."""
    return int(digits * _BITS_PER_DIGIT) + 2


def is_accurate(ball: Ball, digits: int) -> bool:
    """Whether a complex ball is known to `digits` digits.

    The radii of both parts are at most ``10^-digits`` times the least modulus in the ball; where the
    ball holds zero they are at most ``10^-digits`` themselves.
    """
    if not ball.is_finite():
        return False
    with precision(64):
        goal = flint.arb(10) ** (-digits)
        radius = ball.real.rad().max(ball.imag.rad())
        lower = ball.abs_lower()
        size = lower if lower > 0 else flint.arb(1)
        return bool(radius <= (goal * size).lower())


def until_accurate(
    compute: Callable[[int], T],
    balls_of: Callable[[T], Iterable[Ball]],
    digits: int,
    start_bits: int,
    max_bits: int,
) -> T:
    """Repeat a computation at rising precision until every ball has the wanted digits.

    Parameters
    ----------
    compute
        The computation, given the working bits. A `PrecisionError` from it counts as too few bits.
    balls_of
        The balls of a result that must be accurate (see `is_accurate`).
    digits
        Decimal digits, relative to the modulus of each complex number.
    start_bits, max_bits
        First and highest working precision.

    Returns
    -------
    The first result that is accurate.

    Raises
    ------
    PrecisionError
        If `max_bits` does not suffice.
    """
    bits = min(start_bits, max_bits)
    while True:
        try:
            result = compute(bits)
        except PrecisionError:
            if bits >= max_bits:
                raise
        else:
            missing = [ball for ball in balls_of(result) if not is_accurate(ball, digits)]
            if not missing:
                return result
            if bits >= max_bits:
                shown = ", ".join(ball.str(5) for ball in missing[:3])
                raise PrecisionError(
                    f"{len(missing)} of the values are not known to {digits} digits at {bits} bits "
                    f"(such as {shown}); raise the highest working precision (max_bits = {max_bits}) "
                    "or ask for fewer digits"
                )
        bits = min(max_bits, bits + max(bits // 2, 32))
