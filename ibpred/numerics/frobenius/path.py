"""Paths in the complex plane between ordinary points, in steps well inside the discs of convergence."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from fractions import Fraction

from ibpred.balls.context import Ball
from ibpred.errors import PointError

Point = tuple[Fraction, Fraction]
"""Real and imaginary part, exactly."""

Path = tuple[Point, ...]
"""Points visited, start and end included."""

STEP = 0.5
"""Length of a step over the distance to the nearest singular point."""

_MOST_STEPS = 400
_DIGITS = 2**40
_HEIGHTS = (Fraction(1, 2), Fraction(1, 4), Fraction(1), Fraction(1, 8), Fraction(2), Fraction(1, 16))


def straight(poles: Sequence[complex], start: Point, end: Point) -> Path | None:
    """Steps along a segment; None if it runs too close to a singular point.

    Parameters
    ----------
    poles
        Approximate singular points.
    start, end
        Ordinary points.
    """
    path = [start]
    here, goal = _complex(start), _complex(end)
    while True:
        reach = STEP * min((abs(here - pole) for pole in poles), default=float("inf"))
        left = abs(goal - here)
        if left <= reach:
            return (*path, end) if path[-1] != end else tuple(path)
        if len(path) > _MOST_STEPS or reach < 1e-6 * left:
            return None
        point = _rounded(here + (goal - here) * (reach / left))
        path.append(point)
        here = _complex(point)


def polygon(poles: Sequence[complex], corners: Sequence[Point]) -> Path | None:
    """Steps along a polygon; None if it runs too close to a singular point."""
    path: list[Point] = [corners[0]]
    for a, b in itertools.pairwise(corners):
        part = straight(poles, a, b)
        if part is None:
            return None
        path += part[1:]
    return tuple(path)


def planned(poles: Sequence[complex], start: Point, end: Point, side: int) -> Path:
    """The shortest path found between two ordinary points.

    Parameters
    ----------
    poles
        Approximate singular points.
    start, end
        Ordinary points.
    side
        0: the straight segment. +1 or -1: the half plane above or below the segment (seen from start to
        end: to its left or right), around all singular points on the segment.

    Raises
    ------
    PointError
        If every path tried runs into a singular point.
    """
    direct = straight(poles, start, end)
    if side == 0:
        if direct is None:
            raise PointError(
                f"the segment from {_text(start)} to {_text(end)} runs into a singular point; choose a side"
            )
        return direct
    along = (end[0] - start[0], end[1] - start[1])
    found = []
    for height in _HEIGHTS:
        rise = (-along[1] * side * height, along[0] * side * height)
        middle = ((start[0] + end[0]) / 2 + rise[0], (start[1] + end[1]) / 2 + rise[1])
        corners = (start, middle, end)
        path = polygon(poles, corners)
        if path is not None and not _encloses(poles, corners, side):
            found.append(path)
    if not found:
        raise PointError(
            f"no path from {_text(start)} to {_text(end)} on this side avoids the singular points; go through"
            " an intermediate point"
        )
    return min(found, key=len)


def _encloses(poles: Sequence[complex], corners: Sequence[Point], side: int) -> bool:
    """Whether a singular point lies strictly between segment and detour (on the segment is allowed)."""
    a, b, c = (_complex(corner) for corner in corners)

    def turn(p: complex, q: complex, r: complex) -> float:
        return ((q - p).conjugate() * (r - p)).imag * side

    span = abs(c - a)
    for pole in poles:
        off = turn(a, c, pole) / span
        if off > 1e-9 * span and turn(b, a, pole) > 0 and turn(c, b, pole) > 0:
            return True
    return False


def approximate(balls: Sequence[Ball]) -> list[complex]:
    """Midpoints of balls in floating point."""
    return [complex(float(ball.real.mid()), float(ball.imag.mid())) for ball in balls]


def _complex(point: Point) -> complex:
    return complex(float(point[0]), float(point[1]))


def _rounded(value: complex) -> Point:
    """A nearby exact point with few digits relative to its size."""
    size = abs(value)
    unit = Fraction(1, 1)
    while size * float(unit) < _DIGITS / 2**20:
        unit *= 2
    while size * float(unit) > _DIGITS:
        unit /= 2
    return Fraction(round(value.real * float(unit))) / unit, Fraction(round(value.imag * float(unit))) / unit


def _text(point: Point) -> str:
    return str(point[0]) if not point[1] else f"{point[0]} + {point[1]}*i"
