"""The working precision, and exact numbers as balls.

FLINT's Python layer keeps its precision in one process-wide place. `precision` is the only spot of
the package that touches it, and it always puts the old value back.
"""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from fractions import Fraction
from typing import Any, Union

import flint

Ball = Any
"""A complex ball, ``flint.acb``: midpoint and radius of real and imaginary part."""

RealBall = Any
"""A real ball, ``flint.arb``."""

Exact = Union[int, Fraction]


@contextmanager
def precision(bits: int) -> Iterator[None]:
    """Run a block at `bits` of working precision and restore the old precision afterwards.

    Parameters
    ----------
    bits
        At least 2.
    """
    before = flint.ctx.prec
    flint.ctx.prec = bits
    try:
        yield
    finally:
        flint.ctx.prec = before


def real_ball(value: Exact, bits: int) -> RealBall:
    """The real ball of an exact number, rounded to `bits`."""
    exact = Fraction(value)
    with precision(bits):
        return flint.arb(exact.numerator) / exact.denominator


def complex_ball(real: Exact, imaginary: Exact, bits: int) -> Ball:
    """The complex ball of an exact complex number, rounded to `bits`."""
    return flint.acb(real_ball(real, bits), real_ball(imaginary, bits))


def widened(ball: Ball, error: RealBall, bits: int) -> Ball:
    """The ball enlarged by an error of at most `error` in modulus.

    Parameters
    ----------
    ball
        Complex ball.
    error
        Non-negative real ball; its upper end is used. An exact zero leaves the ball as it is.
    """
    if error.is_zero():
        return ball
    with precision(bits):
        size = error.upper()
        margin = flint.arb(0, size)
        return ball + flint.acb(margin, margin)


def modulus_bound(ball: Ball) -> RealBall:
    """Upper bound of ``|z|`` over the ball as an exact non-negative number; zero for an exact zero."""
    return flint.arb(0) if ball.is_zero() else ball.abs_upper()
