"""Leading behaviour of canonical functions that are combinations of closed forms, at a corner."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from math import floor

from ibpred.boundary.behaviour.approach import valuation
from ibpred.boundary.behaviour.expansion import ClosedForm
from ibpred.errors import BoundaryError
from ibpred.exact.rational import Rational
from ibpred.iterated.alphabet import fraction_root
from ibpred.iterated.constants.series import Series, eps_valuation, laurent


@dataclass(frozen=True)
class Contribution:
    """``prod_i x_i^(powers[i] + slopes[i] eps) * coefficient * transcendental`` of one closed form.

    Attributes
    ----------
    powers
        One for each small quantity, none of them positive; half-integers where roots occur.
    slopes
        The class of the exponent.
    coefficient
        In Q(eps).
    form
        What multiplies it: its letters absorbed as numbers.
    """

    powers: tuple[Fraction, ...]
    slopes: tuple[Fraction, ...]
    coefficient: Rational
    form: ClosedForm


_Letters = tuple[tuple[Rational, Fraction, Fraction], ...]
"""Factors ``letter^(power + slope eps)`` as (letter, power, slope)."""


def contributions(
    factor: Rational, closed: ClosedForm, names: Sequence[str], radicands: Sequence[Rational] = ()
) -> tuple[Contribution, ...]:
    """Expand ``factor * closed`` in small quantities, one after the other, each through its zeroth power.

    Parameters
    ----------
    factor
        A nonzero entry of the inverse transformation.
    closed
        The closed form of a master, over the same field.
    names
        The small quantities, the fastest first; there are no others.
    radicands
        Their square roots multiply all this; the leading coefficient of their product must be the square of a
        rational number.

    Raises
    ------
    BoundaryError
        If a letter of the closed form tends to a negative number.
    """
    half, none = Fraction(1, 2), Fraction(0)
    start = (*((u, none, q) for u, q in closed.letters), *((q, half, none) for q in radicands))
    found = []
    for powers, slopes, coefficient, letters in _expanded(factor * closed.rational, start, names):
        numbers = dict(closed.numbers)
        square = Fraction(1)
        for letter, power, q in letters:
            value = letter.to_fraction()
            if power:
                square *= value
            elif value <= 0:
                raise BoundaryError(f"a closed form has the factor ({value})^({q}*eps), which is not real")
            elif value != 1:
                numbers[value] = numbers.get(value, Fraction(0)) + q
        root = fraction_root(square)
        if root is None:
            raise BoundaryError(f"the square root of {square} is not rational")
        form = replace(closed, numbers=tuple(sorted((c, q) for c, q in numbers.items() if q)))
        found.append(Contribution(powers, slopes, coefficient * root, form))
    return tuple(found)


def _expanded(
    product: Rational, letters: _Letters, names: Sequence[str]
) -> list[tuple[tuple[Fraction, ...], tuple[Fraction, ...], Rational, _Letters]]:
    if not names:
        return [((), (), product, letters)]
    name, field = names[0], product.ring
    whole = valuation(product, name, Fraction(0))
    lowest, slope = Fraction(whole), Fraction(0)
    logarithmic = field.zero  # d log of the letters that do not vanish
    stripped = []
    for letter, power, q in letters:
        order = valuation(letter, name, Fraction(0))
        lowest += power * order
        slope += q * order
        letter = letter / field.variable(name) ** order
        exponent = field.variable("eps") * q + power
        logarithmic = logarithmic + letter.derivative(name) / letter * exponent
        stripped.append((letter.substitute({name: 0}), power, q))
    length = max(0, 1 + floor(-lowest))
    smooth = _taylor(product / field.variable(name) ** whole, name, length)
    kernel = _taylor(logarithmic, name, length)
    series: list[Rational] = [field.one]
    for n in range(1, length):
        # h' = h (log h)'
        terms = (kernel[k] * series[n - 1 - k] for k in range(n))
        series.append(sum(terms, field.zero) / n)
    found = []
    for n in range(length):
        coefficient = sum((smooth[k] * series[n - k] for k in range(n + 1)), field.zero)
        if coefficient:
            for powers, slopes, last, rest in _expanded(coefficient, tuple(stripped), names[1:]):
                found.append(((lowest + n, *powers), (slope, *slopes), last, rest))
    return found


def class_sum(
    found: Sequence[Contribution], slopes: Sequence[Fraction], powers: Sequence[Fraction | int], order: int
) -> Series:
    """Coefficient of one class at given powers, as a series in eps through ``eps^order``."""
    total: Series | None = None
    for item in found:
        if item.slopes != tuple(slopes) or item.powers != tuple(powers):
            continue
        start = eps_valuation(item.coefficient)
        if start > order:
            continue
        term = laurent(item.coefficient, order) * item.form.transcendental(order - start + 1)
        total = term if total is None else total + term
    return Series(order + 1, ()) if total is None else total


def _taylor(value: Rational, variable: str, length: int) -> list[Rational]:
    """Taylor coefficients at zero of a function regular there."""
    found: list[Rational] = []
    for _ in range(length):
        first = value.substitute({variable: 0})
        found.append(first)
        value = (value - first) / value.ring.variable(variable)
    return found
