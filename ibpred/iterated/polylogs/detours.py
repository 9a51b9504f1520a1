"""The path from 0 to 1 for iterated integrals, cut so that every piece has a disc free of letters.

Between the discs about its two ends the path is cut by bisection. A letter on the path is passed on the
side asked for. Cutting at one point between two discs is the Hoelder convolution of Borwein, Bradley,
Broadhurst, Lisonek (math/9910045); in general this is Chen's composition of paths.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import pairwise

from ibpred.balls.context import Ball, RealBall, complex_ball
from ibpred.errors import PointError, PrecisionError

Spot = tuple[Fraction, Fraction]
"""Exact real and imaginary part."""

_WIDEST_END = Fraction(7, 10)
_FARTHEST = Fraction(64)
_MOST_PIECES = 20_000


@dataclass(frozen=True)
class UnitLetter:
    """A letter relative to the end point of the path.

    Attributes
    ----------
    ball
        Its place b; exactly 0 or 1 where it is an end of the path.
    side
        +1 if it lies left of the path (b + i0), -1 right of it, 0 if nothing is said.
    """

    ball: Ball
    side: int


@dataclass(frozen=True)
class CutPath:
    """Waypoints of the path without its ends.

    Attributes
    ----------
    first
        The disc about 0 is used up to here.
    pieces
        Straight pieces (from, to) in between, each inside a disc about its midpoint.
    last
        The disc about 1 is used from here.
    """

    first: Spot
    pieces: tuple[tuple[Spot, Spot], ...]
    last: Spot


def cut_path(letters: Sequence[UnitLetter], bits: int) -> CutPath:
    """Cut the path from 0 to 1 (at the current working precision).

    Parameters
    ----------
    letters
        The letters that occur.
    bits
        Precision at which exact points are rounded to balls.

    Raises
    ------
    PointError
        If a letter lies on the path and no side is given.
    PrecisionError
        If a letter is not known well enough to say on which side of the path it lies.
    """
    zero, one = (Fraction(0), Fraction(0)), (Fraction(1), Fraction(0))
    start = _distance(zero, [v for v in letters if v.ball != 0], bits)
    end = _distance(one, [v for v in letters if v.ball != 1], bits)
    on_path = sorted(
        (v for v in letters if v.ball != 0 and v.ball != 1 and _meets(v)), key=lambda v: float(v.ball.real)
    )
    # without the limit the cut may be rounded to an end of the path
    near, far = min(start or _FARTHEST, _FARTHEST), min(end or _FARTHEST, _FARTHEST)
    if not on_path and 1 / (near + far) <= _WIDEST_END:
        cut = (_rounded(near / (near + far)), Fraction(0))
        return CutPath(cut, (), cut)
    first, last = (near / 2, Fraction(0)), (1 - far / 2, Fraction(0))
    waypoints = [first]
    for letter in on_path:
        waypoints += _around(letter, letters, bits)
    waypoints.append(last)
    pieces: list[tuple[Spot, Spot]] = []
    for one_end, other in pairwise(waypoints):
        _bisect(one_end, other, letters, bits, pieces)
    return CutPath(first, tuple(pieces), last)


def _meets(letter: UnitLetter) -> bool:
    """Whether a letter lies strictly between 0 and 1 on the path."""
    real, imaginary = letter.ball.real, letter.ball.imag
    if real < 0 or real > 1 or not imaginary.contains(0):
        return False
    if not (real > 0 and real < 1):
        raise PrecisionError(
            f"a letter at {letter.ball.str(8)} (the path leading from 0 to 1) cannot be told from an end of "
            "the path; give it exactly or raise the working precision"
        )
    if letter.side:
        return True
    if imaginary.is_zero():
        raise PointError(
            f"a letter lies on the path of integration, at {real.str(8, radius=False)} of the way: "
            "say on which side it is passed (+i0 or -i0)"
        )
    raise PrecisionError(
        f"a letter at {letter.ball.str(8)} (the path leading from 0 to 1) may lie on the path; "
        "give its side, or raise the working precision"
    )


def _around(letter: UnitLetter, letters: Sequence[UnitLetter], bits: int) -> list[Spot]:
    """Corners of a detour that leaves the letter on its side and no other letter near."""
    place = letter.ball
    gaps = [place.real.lower(), (1 - place.real).lower()]
    gaps += [(other.ball - place).abs_lower() for other in letters if other is not letter]
    size = _below(min(gaps, key=float)) / 2
    blur = place.real.rad() + place.imag.rad()
    if size <= 0 or (blur > 0 and not blur * 8 < _as_real(size, bits)):
        raise PrecisionError(
            f"letters near {place.str(8)} (the path leading from 0 to 1) cannot be told apart; give them "
            "exactly or raise the working precision"
        )
    centre = _rounded_to(place.real, size)
    lower = Fraction(-letter.side) * size
    return [(centre - size, Fraction(0)), (centre, lower), (centre + size, Fraction(0))]


def _bisect(
    start: Spot, end: Spot, letters: Sequence[UnitLetter], bits: int, pieces: list[tuple[Spot, Spot]]
) -> None:
    stack = [(start, end)]
    while stack:
        left, right = stack.pop()
        if left == right:
            continue
        middle = ((left[0] + right[0]) / 2, (left[1] + right[1]) / 2)
        reach = _distance(middle, letters, bits)
        width = abs(right[0] - left[0]) + abs(right[1] - left[1])  # at least twice the half width
        if reach is None or width <= reach:
            pieces.append((left, right))
            if len(pieces) > _MOST_PIECES:
                raise PrecisionError(
                    f"the path passes a letter so closely that more than {_MOST_PIECES} pieces would be "
                    "needed"
                )
        elif len(stack) > 64 + 4 * bits:
            raise PrecisionError(
                "a letter cannot be told from the path of integration; give it exactly or raise the "
                "working precision"
            )
        else:
            stack += [(middle, right), (left, middle)]


def _distance(spot: Spot, letters: Sequence[UnitLetter], bits: int) -> Fraction | None:
    """A number a little below the distance of the nearest letter; None without letters."""
    if not letters:
        return None
    here = complex_ball(*spot, bits)
    nearest = min(((v.ball - here).abs_lower() for v in letters), key=_below)
    return _below(nearest)


def _below(value: RealBall) -> Fraction:
    """A short dyadic number at most `value`, close to it; zero where `value` may be zero."""
    lower = value.lower()
    if not lower > 0:
        return Fraction(0)
    mantissa, exponent = (int(v) for v in lower.man_exp())
    surplus = max(mantissa.bit_length() - 16, 0)
    return Fraction(mantissa >> surplus) * Fraction(2) ** (exponent + surplus)


def _rounded(value: Fraction) -> Fraction:
    return Fraction(round(value * 65536), 65536)


def _rounded_to(value: RealBall, size: Fraction) -> Fraction:
    """A dyadic number within a small fraction of `size` of the ball's midpoint."""
    mantissa, exponent = (int(v) for v in value.mid().man_exp())
    exact = Fraction(mantissa) * Fraction(2) ** exponent
    unit = Fraction(2) ** (size.numerator.bit_length() - size.denominator.bit_length() - 12)
    return round(exact / unit) * unit


def _as_real(value: Fraction, bits: int) -> RealBall:
    return complex_ball(value, 0, bits).real
