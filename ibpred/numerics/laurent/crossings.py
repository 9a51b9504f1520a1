"""Singular points on a straight line between two kinematic points, and the side on which i0 passes them.

Every line's -i0 gives F an imaginary part of fixed sign. Where F is linear in the variables v with
coefficients of one sign each, that is what ``v -> v + i delta n_v`` does, with n_v = +1, -1 or 0. On the line
``v = a + x (b - a)`` a singular point ``g(v(x)) = 0`` is thereby moved by
``-i delta (n . grad g)/((b - a) . grad g)``: the line passes above it where that points down, below where it
points up, and on either side where it does not move.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import pairwise

import flint

from ibpred.balls.context import Ball, RealBall, precision
from ibpred.errors import PointError
from ibpred.exact.rational import Rational, ring
from ibpred.numerics.frobenius.path import Path, planned

_BITS = 200
_LINE = ring(("x",))


@dataclass(frozen=True)
class Crossing:
    """A singular point between the ends of a line.

    Attributes
    ----------
    letter
        What vanishes.
    place
        Where on the line, between 0 and 1.
    side
        +1: the line passes above it, -1: below, 0: either.
    """

    letter: Rational
    place: RealBall
    side: int


def along_line(letter: Rational, start: Mapping[str, Fraction], end: Mapping[str, Fraction]) -> Rational:
    """A polynomial of the variables on the line ``start + x (end - start)``, as an element of Q(x)."""
    x = _LINE.variable("x")
    images = {name: x * (end[name] - start[name]) + start[name] for name in start}
    return letter.substitute({name: images.get(name, _LINE.zero) for name in letter.ring.names})


def coefficients(polynomial: Rational) -> tuple[int, ...]:
    """Integer coefficients of the numerator of an element of Q(x), constant term first."""
    terms = {int(e[0]): int(c) for e, c in polynomial.numerator.to_dict().items()}
    return tuple(terms.get(k, 0) for k in range(max(terms, default=0) + 1))


def crossings(
    letters: Sequence[Rational],
    start: Mapping[str, Fraction],
    end: Mapping[str, Fraction],
    turns: Mapping[str, int],
) -> tuple[Crossing, ...]:
    """The singular points strictly between the ends of a line, in order.

    Parameters
    ----------
    letters
        Irreducible polynomials whose zeros are singular.
    start, end
        The ends.
    turns
        n_v for every variable.

    Raises
    ------
    PointError
        If an end is singular, the whole line is, or it touches a singularity without crossing it.
    """
    found = []
    for letter in letters:
        if not set(letter.variables()) <= set(start):
            continue
        along = along_line(letter, start, end)
        if not along:
            raise PointError(
                f"the line to the point runs inside the singularity {letter} = 0; move the point"
            )
        numbers = coefficients(along)
        for x, name in ((0, "start"), (1, "end")):
            if sum(numbers) == 0 if x else numbers[0] == 0:
                place = start if name == "start" else end
                point = ", ".join(f"{v} = {value}" for v, value in place.items())
                raise PointError(
                    f"the point {point} lies on the singularity {letter} = 0; choose another point"
                )
        moved = sum(
            (along_line(letter.derivative(v), start, end) * n for v, n in turns.items() if n), _LINE.zero
        )
        found += _real_crossings(letter, along, moved)
    return tuple(sorted(found, key=lambda crossing: float(crossing.place)))


def _real_crossings(letter: Rational, along: Rational, moved: Rational) -> list[Crossing]:
    found = []
    with precision(_BITS):
        polynomial = flint.fmpz_poly(list(coefficients(along)))
        sign = 1 if along.denominator.leading_coefficient() > 0 else -1
        for factor, multiplicity in polynomial.factor()[1]:
            for root, _ in factor.complex_roots():
                x = root.real
                if not root.imag.is_zero() or not (x > 0 and x < 1):
                    continue
                shift = _at(moved, x)
                if shift.contains(0):
                    found.append(Crossing(letter, x, 0))
                    continue
                if multiplicity > 1:
                    raise PointError(
                        f"the line to the point touches the singularity {letter} = 0 without crossing it; "
                        "go by way of another point"
                    )
                slope = polynomial.derivative()(x) * sign
                found.append(Crossing(letter, x, 1 if shift * slope > 0 else -1))
    return found


def _at(value: Rational, x: RealBall) -> RealBall:
    above = flint.fmpz_poly(list(coefficients(value)))(x)
    below = int(value.denominator.leading_coefficient())
    return above / below


def around(poles: Sequence[complex], passed: Sequence[Crossing]) -> Path:
    """A path from 0 to 1 in the complex plane that passes every singular point on its side.

    Parameters
    ----------
    poles
        All singular points in the plane, approximately.
    passed
        Those between 0 and 1 (see `crossings`).

    Raises
    ------
    PointError
        If no path is found.
    """
    sided = [crossing for crossing in passed if crossing.side]
    cuts = [Fraction(0)]
    sides = []
    for one, other in pairwise(sided):
        if one.side != other.side:
            if not one.place < other.place:
                raise PointError(
                    f"{one.letter} = 0 and {other.letter} = 0 cross the line in one point, to be passed on "
                    "different sides; go by way of another point"
                )
            cuts.append(_between(one.place, other.place, passed))
            sides.append(one.side)
    sides.append(sided[-1].side if sided else (1 if passed else 0))
    cuts.append(Fraction(1))
    path: list[tuple[Fraction, Fraction]] = []
    for (a, b), side in zip(pairwise(cuts), sides, strict=True):
        part = planned(poles, (a, Fraction(0)), (b, Fraction(0)), side)
        path += part[1:] if path else part
    return tuple(path)


def _between(low: RealBall, high: RealBall, passed: Sequence[Crossing]) -> Fraction:
    """A point between two crossings, in the middle of the widest gap."""
    inside = [float(c.place) for c in passed if low <= c.place and c.place <= high]
    marks = sorted({float(low), float(high), *inside})
    a, b = max(pairwise(marks), key=lambda gap: gap[1] - gap[0])
    return Fraction((a + b) / 2).limit_denominator(10**6)


def approximate_roots(polynomials: Sequence[Sequence[int]]) -> list[complex]:
    """All complex zeros, in floating point."""
    found = []
    with precision(80):
        for numbers in polynomials:
            if len(numbers) > 1:
                roots: list[tuple[Ball, int]] = flint.fmpz_poly(list(numbers)).complex_roots()
                found += [complex(float(root.real.mid()), float(root.imag.mid())) for root, _ in roots]
    return found
