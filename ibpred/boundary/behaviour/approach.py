"""How a point at the border of the Euclidean region is approached: scales in turn, then a variable.

Orders of vanishing are vectors: first in the scale that vanishes fastest, with its leading coefficient in the
next one, and so on. They compare lexicographically.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

import flint

from ibpred.balls.context import precision
from ibpred.exact.rational import Polynomial, Rational
from ibpred.iterated.transport import Infinity, Point

_ROOT_BITS = 128


@dataclass(frozen=True)
class Approach:
    """``scales[0] << scales[1] << ... << 1`` all tend to zero, then the variable tends to the point.

    Attributes
    ----------
    scales
        Names, the fastest first; empty for one ratio.
    variable
        What moves at last.
    point
        Where it goes, from 0 along the positive axis (negative points: after a half turn about 0).
    """

    scales: tuple[str, ...]
    variable: str
    point: Point

    def orders(self, value: Rational) -> tuple[int, ...]:
        """Order of vanishing of a nonzero function in each scale, then in the variable at the point."""
        powers, last = leading(value, self.scales)
        return (*powers, valuation(last, self.variable, self.point))

    def leading(self, value: Rational) -> tuple[tuple[int, ...], Rational]:
        """The orders, and what multiplies that product of the scales and the distance to the point."""
        powers, last = leading(value, self.scales)
        power, coefficient = leading_at(last, self.variable, self.point)
        return (*powers, power), coefficient


def leading_at(value: Rational, variable: str, point: Point) -> tuple[int, Rational]:
    """Lowest power of the distance to a point, and what multiplies it.

    The distance is ``|x - point|``, from the side of zero, or 1/x at infinity.
    """
    power = valuation(value, variable, point)
    return power, (near(value, variable, point) / value.ring.variable(variable) ** power).substitute(
        {variable: 0}
    )


def near(value: Rational, variable: str, point: Point) -> Rational:
    """A function in terms of the distance to a point, which takes the place of the variable."""
    if point == 0:
        return value
    x = value.ring.variable(variable)
    if isinstance(point, Infinity):
        return value.substitute({variable: 1 / x})
    return value.substitute({variable: point - x if point > 0 else x + point})


def leading(value: Rational, scales: Sequence[str]) -> tuple[tuple[int, ...], Rational]:
    """Lowest powers in the scales, one after the other, and what multiplies them."""
    powers = []
    for name in scales:
        power = valuation(value, name, Fraction(0))
        if power or name in value.variables():
            value = (value / value.ring.variable(name) ** power).substitute({name: 0})
        powers.append(power)
    return tuple(powers), value


def valuation(value: Rational, variable: str, point: Point) -> int:
    """Order of vanishing at a point (in 1/x at infinity) of a nonzero function."""
    place = value.ring.index(variable)
    if isinstance(point, Infinity):
        above, below = (int(p.degrees()[place]) for p in (value.numerator, value.denominator))
        return below - above
    if point == 0:
        least = [min(int(e[place]) for e in p.monoms()) for p in (value.numerator, value.denominator)]
        return least[0] - least[1]
    shift = value.ring.variable(variable) * point.denominator - point.numerator
    total = 0
    for polynomial, sign in ((value.numerator, 1), (value.denominator, -1)):
        quotient, rest = divmod(polynomial, shift.numerator)
        while rest.is_zero():
            total += sign
            quotient, rest = divmod(quotient, shift.numerator)
    return total


def is_positive_before(value: Rational, variable: str, point: Point) -> bool:
    """Whether a function of one variable is positive between 0 and the point.

    Parameters
    ----------
    value
        Depends on the variable only.
    variable
        Its name.
    point
        Zero asks for a neighbourhood of zero on the positive side. Negative points are not allowed.
    """
    if not value:
        return False
    content, factors = value.factors()
    sign = 1 if content > 0 else -1
    place = value.ring.index(variable)
    for polynomial, multiplicity in factors:
        coefficients = _coefficients(polynomial, place)
        if multiplicity % 2:
            sign *= 1 if next(c for c in coefficients if c) > 0 else -1
        if point != 0 and multiplicity % 2 and has_root_before(coefficients, point):
            return False
    return sign > 0


def _coefficients(polynomial: Polynomial, place: int) -> list[int]:
    terms = {int(e[place]): int(c) for e, c in polynomial.to_dict().items()}
    return [terms.get(k, 0) for k in range(max(terms) + 1)]


def has_root_before(coefficients: Sequence[int], point: Point) -> bool:
    """Whether an irreducible polynomial may have a root in the open interval from 0 to the point."""
    if all(c >= 0 for c in coefficients) or all(c <= 0 for c in coefficients):
        return False
    if len(coefficients) == 2:
        root = Fraction(-coefficients[0], coefficients[1])
        return root > 0 and (isinstance(point, Infinity) or root < point)
    with precision(_ROOT_BITS):
        end = (
            None if isinstance(point, Infinity) else flint.arb(flint.fmpq(point.numerator, point.denominator))
        )
        for root, _ in flint.fmpz_poly(list(coefficients)).complex_roots():
            off = not root.imag.contains(0) or root.real < 0 or (end is not None and root.real > end)
            if not off:
                return True
    return False
