"""Balls as decimal text: digits of the midpoint and a radius rounded upwards."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import flint

from ibpred.balls.context import Ball, RealBall, precision
from ibpred.errors import PrecisionError

_PLAIN_EXPONENTS = range(-6, 25)


@dataclass(frozen=True)
class DecimalBall:
    """A complex number in decimal digits.

    Attributes
    ----------
    re, im
        Decimal text of the midpoint.
    radius
        Decimal text; bounds the error of `re` and of `im`, the rounding to decimals included. ``"0"``
        where both are exact.
    """

    re: str
    im: str
    radius: str


def decimal_ball(ball: Ball, digits: int) -> DecimalBall:
    """A complex ball in decimal digits, rounded outwards.

    Parameters
    ----------
    ball
        Finite complex ball.
    digits
        Significant digits to print of each part (at least 1). Digits below the radius are not printed.

    Raises
    ------
    PrecisionError
        If the ball is not finite.
    """
    if not ball.is_finite():
        raise PrecisionError(f"a value has no finite ball ({ball.str(5)}); raise the working precision")
    re, re_error = _decimal(ball.real, digits)
    im, im_error = _decimal(ball.imag, digits)
    return DecimalBall(re, im, _radius(max(re_error, im_error, key=_size)))


def ball_of_decimal(value: DecimalBall, bits: int) -> Ball:
    """The complex ball of decimal digits: both parts with the radius."""
    with precision(bits):
        margin = flint.arb(0, flint.arb(value.radius).upper())
        return flint.acb(flint.arb(value.re) + margin, flint.arb(value.im) + margin)


# A decimal number m * 10^e is kept as the pair (m, e) of integers.
_Scaled = tuple[int, int]


def _size(number: _Scaled) -> Any:
    mantissa, exponent = number
    return flint.fmpq(mantissa) * flint.fmpq(10) ** exponent


def _decimal(ball: RealBall, digits: int) -> tuple[str, _Scaled]:
    if ball.is_zero():
        return "0", (0, 0)
    mid, rad, exponent = (int(part) for part in ball.mid_rad_10exp(digits + 5))
    # drop digits beyond those asked for, and those below the leading digit of the radius
    surplus = max(len(str(abs(mid))) - digits, len(str(rad)) - 1 if rad else 0, 0)
    unit = 10**surplus
    rounded = (abs(mid) + unit // 2) // unit * (1 if mid >= 0 else -1)
    error = rad + abs(mid - rounded * unit)
    power = exponent + surplus
    # zeros after the point say nothing where the number is exact, nor where 9.99.. was rounded up to 10.0..
    while rounded and rounded % 10 == 0 and ((error == 0 and power < 0) or len(str(abs(rounded))) > digits):
        rounded //= 10
        power += 1
    return _text(rounded, power), (error, exponent)


def _radius(error: _Scaled) -> str:
    mantissa, exponent = error
    if mantissa == 0:
        return "0"
    surplus = max(len(str(mantissa)) - 2, 0)
    mantissa = -(-mantissa // 10**surplus)
    text = str(mantissa)
    exponent += surplus + len(text) - 1
    tail = text[1:].rstrip("0")
    return f"{text[0]}{'.' + tail if tail else ''}e{exponent}"


def _text(mantissa: int, exponent: int) -> str:
    if mantissa == 0:
        return "0"
    sign = "-" if mantissa < 0 else ""
    figures = str(abs(mantissa))
    leading = exponent + len(figures) - 1
    if leading in _PLAIN_EXPONENTS and exponent <= 0:
        if exponent == 0:
            return sign + figures
        if leading >= 0:
            return f"{sign}{figures[: leading + 1]}.{figures[leading + 1 :]}"
        return f"{sign}0.{'0' * (-leading - 1)}{figures}"
    tail = figures[1:]
    return f"{sign}{figures[0]}{'.' + tail if tail else ''}e{leading}"
