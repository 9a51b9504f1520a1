"""Square roots of polynomials that are quadratic in one variable: rational parametrisation of a conic.

``r^2 = A x^2 + B x + C`` over the field of the other variables is a conic. The lines through a rational
point meet it in one more point, so their slope t is a rational parameter of it:

* through ``(rho, r0)``, with ``r = r0 + t (x - rho)``: ``x = rho + (2 r0 t - B - 2 A rho)/(A - t^2)``;
* through a point at infinity, where A is a square s^2, with ``r = s x + t``: ``x = (t^2 - C)/(B - 2 s t)``.

All parametrisations are Möbius transformations of one of them; the transformation is chosen by the points
at which letters vanish, so that three of them come to lie at 0, infinity and 1 or -1.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import isqrt

from ibpred.epsform.places import coefficients, degree
from ibpred.exact.rational import Polynomial, Rational, Ring, ring


@dataclass(frozen=True)
class Step:
    """One variable expressed in terms of a new one and of the others.

    Attributes
    ----------
    old, new
        The variable that goes and the one that comes in its place.
    value
        The old one, an element of the ring with the new one in its place.
    """

    old: str
    new: str
    value: Rational

    def pulled(self, element: Rational) -> Rational:
        """An element in terms of the new variable."""
        return element.substitute({self.old: self.value})


def square_root(value: Rational) -> Rational | None:
    """The square root, with a positive leading coefficient, where it is rational."""
    if not value:
        return value
    content, found = value.factors()
    top, bottom = isqrt(abs(content.numerator)), isqrt(content.denominator)
    if content < 0 or top * top != content.numerator or bottom * bottom != content.denominator:
        return None
    if any(power % 2 for _, power in found):
        return None
    root = value.ring.constant(Fraction(top, bottom))
    for factor, power in found:
        root = root * as_element(factor, value.ring) ** (power // 2)
    return root


def as_element(polynomial: Polynomial, field: Ring) -> Rational:
    """A polynomial as an element of its field."""
    return Rational(field, polynomial, field.context.constant(1))


def without_squares(value: Rational) -> Rational:
    """The polynomial without square factors whose square root is that of the element up to a rational one.

    Its content is one of the square-free integers.
    """
    content, found = value.factors()
    size = abs(content.numerator) * content.denominator
    divisor = 2
    while divisor * divisor <= size:
        if size % (divisor * divisor):
            divisor += 1
        else:
            size //= divisor * divisor
    total = value.ring.constant(size if content > 0 else -size)
    for factor, power in found:
        if power % 2:
            total = total * as_element(factor, value.ring)
    return total


def odd_factors(value: Rational) -> tuple[Rational, ...]:
    """The irreducible polynomials that occur to an odd power, in canonical order."""
    found = [as_element(factor, value.ring) for factor, power in value.factors()[1] if power % 2]
    return tuple(found)


def swapped(field: Ring, old: str, new: str) -> Ring:
    """The ring with another variable in the place of one."""
    return ring(new if name == old else name for name in field.names)


def parametrised(radicand: Rational, name: str, new: str, letters: Sequence[Rational]) -> Step | None:
    """The variable as a function of the slope of lines through a rational point of the conic.

    Parameters
    ----------
    radicand
        A polynomial without square factors.
    name
        A variable.
    new
        Name of the slope.
    letters
        Polynomials; rational points are looked for at their zeros.

    Returns
    -------
    step or None
        None where the degree is not one or two, or no rational point is found.
    """
    field = radicand.ring
    parts = coefficients(radicand.numerator, field, name)
    if not 1 <= max(parts) <= 2:
        return None
    target = swapped(field, name, new)
    t = target.variable(new)
    a, b, c = (parts.get(k, field.zero) for k in (2, 1, 0))
    a_, b_, c_ = (value.to_ring(target) for value in (a, b, c))
    s = square_root(a)
    if s is not None:
        below = b_ - s.to_ring(target) * t * 2
        return Step(name, new, (t * t - c_) / below) if below else None
    for rho in _zeros([radicand, field.variable(name), *letters], name):
        r0 = square_root(a * rho * rho + b * rho + c)
        if r0 is not None:
            at, root = rho.to_ring(target), r0.to_ring(target)
            return Step(name, new, at + (root * t * 2 - b_ - a_ * at * 2) / (a_ - t * t))
    return None


def _zeros(letters: Sequence[Rational], name: str) -> Iterator[Rational]:
    """Zeros of the factors that are linear in the variable, without repetition."""
    seen: list[Rational] = []
    for letter in letters:
        for factor, _ in letter.factors()[1]:
            zero = _zero(factor, letter.ring, name)
            if zero is not None and zero not in seen:
                seen.append(zero)
                yield zero


def _zero(polynomial: Polynomial, field: Ring, name: str) -> Rational | None:
    if degree(polynomial, field, name) != 1:
        return None
    parts = coefficients(polynomial, field, name)
    return -parts.get(0, field.zero) / parts[1]


def normalisations(step: Step, letters: Sequence[Rational]) -> Iterator[Step]:
    """The same change with another parameter, three zeros of letters at 0, infinity and 1 or -1.

    Parameters
    ----------
    step
        A parametrisation.
    letters
        Letters in terms of its parameter; the points are their zeros and infinity.
    """
    points: list[Rational | None] = [None, *_zeros(letters, step.new)]
    w = step.value.ring.variable(step.new)
    for i, zero in enumerate(points):
        for j, pole in enumerate(points):
            if i == j:
                continue
            for k, unit in enumerate(points):
                if k in (i, j):
                    continue
                for sign in (1, -1):
                    image = _moebius(zero, pole, unit, w * sign)
                    yield Step(step.old, step.new, step.value.substitute({step.new: image}))


def _moebius(zero: Rational | None, pole: Rational | None, unit: Rational | None, w: Rational) -> Rational:
    """The Möbius transformation that takes 0, infinity, 1 to three points (None for infinity)."""
    if zero is None:
        assert pole is not None
        assert unit is not None
        return pole + (unit - pole) / w
    if pole is None:
        assert unit is not None
        return zero + (unit - zero) * w
    scale = w * -1 if unit is None else w * (unit - zero) / (pole - unit)
    return (pole * scale + zero) / (scale + 1)
