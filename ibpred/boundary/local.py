"""Local expansion at x = 0 of canonical functions that are combinations of closed forms."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from fractions import Fraction

from ibpred.boundary.expansion import ClosedForm
from ibpred.boundary.regions import valuation
from ibpred.exact.rational import Rational
from ibpred.iterated.series import Series, eps_valuation, laurent


@dataclass(frozen=True)
class Contribution:
    """``x^(slope eps) sum_n coefficients[n] x^(lowest + n) * transcendental`` of one closed form.

    Attributes
    ----------
    slope
        The class of the exponent.
    lowest
        Power of x of the first coefficient; the last one belongs to x^0.
    coefficients
        In Q(eps, x), free of x.
    form
        What multiplies them: constant letters absorbed as numbers.
    """

    slope: Fraction
    lowest: int
    coefficients: tuple[Rational, ...]
    form: ClosedForm


def contribution(factor: Rational, closed: ClosedForm, variable: str) -> Contribution:
    """Expand ``factor * closed`` at x = 0 through x^0.

    Parameters
    ----------
    factor
        A nonzero entry of the inverse transformation, in Q(eps, x).
    closed
        The closed form of a master, over the same field.
    variable
        The ratio.
    """
    field = factor.ring
    product = factor * closed.rational
    lowest = valuation(product, variable, Fraction(0))
    slope = Fraction(0)
    numbers = list(closed.numbers)
    logarithmic = field.zero  # d log of the letters that do not vanish at x = 0
    for letter, q in closed.letters:
        at_zero = letter.substitute({variable: 0})
        if not at_zero:
            slope += q * valuation(letter, variable, Fraction(0))
            letter = letter / field.variable(variable) ** valuation(letter, variable, Fraction(0))
            at_zero = letter.substitute({variable: 0})
        constant = at_zero.to_fraction()
        if constant != 1:
            numbers.append((constant, q))
        logarithmic = logarithmic + letter.derivative(variable) / letter * field.variable("eps") * q
    length = max(0, 1 - lowest)
    smooth = _taylor(product / field.variable(variable) ** lowest, variable, length)
    kernel = _taylor(logarithmic, variable, length)
    power: list[Rational] = [field.one]
    for n in range(1, length):
        # h' = h (log h)'
        terms = (kernel[k] * power[n - 1 - k] for k in range(n))
        power.append(sum(terms, field.zero) / n)
    coefficients = tuple(
        sum((smooth[k] * power[n - k] for k in range(n + 1)), field.zero) for n in range(length)
    )
    merged: dict[Fraction, Fraction] = {}
    for number, q in numbers:
        merged[number] = merged.get(number, Fraction(0)) + q
    form = replace(closed, numbers=tuple(sorted((c, q) for c, q in merged.items() if q)))
    return Contribution(slope, lowest, coefficients, form)


def class_sum(contributions: Sequence[Contribution], slope: Fraction, power: int, order: int) -> Series:
    """Coefficient of ``x^(power + slope eps)``, power <= 0, as a series in eps through ``eps^order``."""
    total: Series | None = None
    for item in contributions:
        place = power - item.lowest
        if item.slope != slope or not 0 <= place < len(item.coefficients):
            continue
        coefficient = item.coefficients[place]
        if not coefficient:
            continue
        start = eps_valuation(coefficient)
        if start > order:
            continue
        term = laurent(coefficient, order) * item.form.transcendental(order - start + 1)
        total = term if total is None else total + term
    return Series(order + 1, ()) if total is None else total


def _taylor(value: Rational, variable: str, length: int) -> list[Rational]:
    """Taylor coefficients at x = 0 of a function regular there."""
    found: list[Rational] = []
    for _ in range(length):
        first = value.substitute({variable: 0})
        found.append(first)
        value = (value - first) / value.ring.variable(variable)
    return found
