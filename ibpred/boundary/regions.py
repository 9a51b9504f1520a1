"""How an integral may behave at a singular point, read off its parametric representation.

``I ~ int prod_i dx_i x_i^(a_i - 1) (U + F)^(-d/2)`` (Lee, Pomeransky, arXiv:1308.6676). At the border of
the Euclidean region, where all coefficients are positive, the expansion by regions (Beneke, Smirnov,
hep-ph/9711391) is geometric: each lower facet of the Newton polytope of U + F with the ratio's power as an
extra direction is a region (Pak, Smirnov, arXiv:1011.4863; Jantzen, Smirnov, Smirnov, arXiv:1206.0546).
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from itertools import product

from ibpred.boundary.expansion import ClosedForm
from ibpred.boundary.polytope import LowerFacet, lower_facets, separating_functional
from ibpred.exact.rational import Rational
from ibpred.family.definition import FamilyDefinition
from ibpred.family.polynomials import symanzik
from ibpred.iterated.transport import Infinity, Point

Coefficients = Mapping[tuple[int, ...], Rational]
"""Parameter monomial -> coefficient, a function of the ratio."""


@dataclass(frozen=True, order=True)
class Exponent:
    """A possible behaviour ``u^(power + slope eps) * (power series in u)`` at u -> 0+.

    Attributes
    ----------
    power
        Leading power at eps = 0; higher ones follow in integer steps.
    slope
        Coefficient of eps.
    logs
        Whether logarithms of u may multiply it at generic eps.
    """

    power: Fraction
    slope: Fraction
    logs: bool


Behaviour = tuple[Exponent, ...]
"""All behaviours that an integral can have at a point."""

ANALYTIC: Behaviour = (Exponent(Fraction(0), Fraction(0), False),)


@dataclass(frozen=True)
class ParametricFamily:
    """U and F on a line of kinematics, with parameters for all lines (numerators included).

    Attributes
    ----------
    variable
        Name of the ratio, positive in the Euclidean region.
    dimension
        d0.
    first, second
        U and F.
    """

    variable: str
    dimension: int
    first: Coefficients
    second: Coefficients


def parametric_family(
    family: FamilyDefinition, values: Mapping[str, Rational], variable: str
) -> ParametricFamily:
    """U and F of a family on a line of kinematics.

    Parameters
    ----------
    family
        The family.
    values
        Each invariant as an element of one field that holds the ratio: the unit +1 or -1, the others
        their Euclidean sign times the ratio.
    variable
        Name of the ratio.
    """
    # numerators take part as lines whose powers tend to negative integers
    everything = replace(family, lines=tuple(replace(line, numerator=False) for line in family.lines))
    first, second = symanzik(everything)
    return ParametricFamily(
        variable,
        family.dimension,
        {e: c.substitute(values) for e, c in first.terms.items()},
        {e: v for e, c in second.terms.items() if (v := c.substitute(values))},
    )


def behaviour(family: ParametricFamily, powers: Sequence[int], point: Point) -> Behaviour | None:
    """What an integral can do at a point of the ratio, on the sheet of the Euclidean region.

    Parameters
    ----------
    family
        U and F on the line.
    powers
        One power for each line; negative ones are numerators.
    point
        0 or infinity (approached from positive ratio), or any other rational number (negative ones
        approached from the positive axis through the upper or lower half plane).

    Returns
    -------
    Behaviour or None
        None where nothing is claimed.
    """
    sector = tuple(i for i, power in enumerate(powers) if power > 0)
    if isinstance(point, Infinity) or point == 0:
        return _regions(family, powers, sector, point)
    own = _restricted(family.second, sector)
    if point > 0:
        return ANALYTIC if _all_positive({**_restricted(family.first, sector), **own}, point) else None
    return ANALYTIC if _separated(own, family.variable, point) else None


def behaviour_of_closed_form(form: ClosedForm, variable: str, point: Point) -> Behaviour:
    """The exponent of a closed form at a point: no logarithms at generic eps."""
    power = Fraction(valuation(form.rational, variable, point))
    slope = sum((q * valuation(letter, variable, point) for letter, q in form.letters), Fraction(0))
    return (Exponent(power, slope, False),)


def valuation(value: Rational, variable: str, point: Point) -> int:
    """Order of vanishing at a point (in 1/x at infinity) of a nonzero function of the ratio (and eps)."""
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


def _restricted(terms: Coefficients, sector: Sequence[int]) -> dict[tuple[int, ...], Rational]:
    """Terms without the parameters outside the sector, exponents over the sector only."""
    inside = set(sector)
    return {
        tuple(e[i] for i in sector): c
        for e, c in terms.items()
        if not any(n for i, n in enumerate(e) if i not in inside)
    }


def _all_positive(terms: Coefficients, point: Fraction) -> bool:
    for coefficient in terms.values():
        names = coefficient.variables()
        value = coefficient.substitute(dict.fromkeys(names, point)).to_fraction()
        if value <= 0:
            return False
    return True


def _separated(terms: Coefficients, variable: str, point: Fraction) -> bool:
    """Whether no Landau singularity lies at a negative point on the principal sheet.

    Each coefficient must be alpha + beta x with alpha, beta >= 0 (then F does not vanish for x off the
    negative axis) and must not vanish at the point. If a linear functional of the exponents separates
    positive from negative terms strictly, F and its scaling derivative along it have no common zero
    at positive parameters, nor on any face; rotating the parameters along it keeps F away from zero.
    """
    above: list[tuple[int, ...]] = []
    below: list[tuple[int, ...]] = []
    for exponents, coefficient in terms.items():
        if not coefficient.is_polynomial():
            return False
        slope = coefficient.derivative(variable)
        if not slope.is_constant():
            return False
        alpha = coefficient.substitute({variable: 0}).to_fraction()
        beta = slope.to_fraction()
        value = alpha + beta * point
        if alpha < 0 or beta < 0 or value == 0:
            return False
        (above if value > 0 else below).append(exponents)
    return separating_functional(above, below) is not None


def _regions(
    family: ParametricFamily, powers: Sequence[int], sector: Sequence[int], point: Point
) -> Behaviour | None:
    first, second = _restricted(family.first, sector), _restricted(family.second, sector)
    terms = [*first.items(), *second.items()]
    if not all(_positive(coefficient) for _, coefficient in terms):
        return None
    points = [(e, valuation(c, family.variable, point)) for e, c in terms]
    facets = lower_facets(points)
    numerators = {i: -power for i, power in enumerate(powers) if power < 0}
    derivatives = _derivatives(family, sector, numerators, point)
    half = Fraction(family.dimension, 2)
    positive = [powers[i] for i in sector]
    found: list[tuple[Fraction, Fraction]] = []
    for facet in facets:
        shift = _numerator_shift(facet, derivatives, tuple(numerators.values()))
        if shift is None:
            continue
        power = sum((v * a for v, a in zip(facet.normal, positive, strict=True)), Fraction(0))
        found.append((power - facet.offset * half + shift, facet.offset))
    slopes = [slope for _, slope in found]
    return tuple(sorted(Exponent(power, slope, slopes.count(slope) > 1) for power, slope in set(found)))


def _positive(coefficient: Rational) -> bool:
    terms = (*coefficient.numerator.coeffs(), *coefficient.denominator.coeffs())
    return all(c > 0 for c in terms)


Derivatives = Mapping[tuple[int, ...], Sequence[tuple[tuple[int, ...], int]]]


def _derivatives(
    family: ParametricFamily, sector: Sequence[int], numerators: Mapping[int, int], point: Point
) -> Derivatives:
    """Terms of U + F by their powers of the numerators' parameters: (exponents in the sector, valuation)."""
    allowed = {*sector, *numerators}
    found: dict[tuple[int, ...], list[tuple[tuple[int, ...], int]]] = {}
    for terms in (family.first, family.second):
        for exponents, coefficient in terms.items():
            if any(n for i, n in enumerate(exponents) if i not in allowed):
                continue
            order = tuple(exponents[i] for i in numerators)
            inside = tuple(exponents[i] for i in sector)
            found.setdefault(order, []).append((inside, valuation(coefficient, family.variable, point)))
    return found


def _numerator_shift(facet: LowerFacet, derivatives: Derivatives, orders: tuple[int, ...]) -> Fraction | None:
    """Least change of the power by numerators; None where the numerator makes the region vanish.

    A power -n of a line is an n-fold derivative of ``(U+F)^(-d/2)`` in its parameter at zero: products of
    derivatives of U + F, each with one more inverse power of U + F.
    """
    if not any(orders):
        return Fraction(0)
    cost: dict[tuple[int, ...], Fraction] = {}
    for order, terms in derivatives.items():
        if any(order):
            scalings = (
                p + sum((v * e for v, e in zip(facet.normal, r, strict=True)), Fraction(0)) for r, p in terms
            )
            cost[order] = min(scalings) - facet.offset
    best: dict[tuple[int, ...], Fraction] = {(0,) * len(orders): Fraction(0)}
    for total in _below(orders):
        ways = [
            best[rest] + value
            for order, value in cost.items()
            if (rest := tuple(t - o for t, o in zip(total, order, strict=True))) in best
        ]
        if ways and any(total):
            best[total] = min(ways)
    return best.get(orders)


def _below(orders: tuple[int, ...]) -> Iterator[tuple[int, ...]]:
    """All multi-indices up to `orders`, each after those below it."""
    yield from sorted(product(*(range(n + 1) for n in orders)), key=lambda t: (sum(t), t))
