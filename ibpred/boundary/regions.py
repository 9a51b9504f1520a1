"""How an integral may behave at the border of the Euclidean region, read off its parametric representation.

``I ~ int prod_i dx_i x_i^(a_i - 1) (U + F)^(-d/2)`` (Lee, Pomeransky, arXiv:1308.6676). Where all
coefficients are positive, the expansion by regions (Beneke, Smirnov, hep-ph/9711391) is geometric: each
lower facet of the Newton polytope of U + F with the power of the small quantity as an extra direction is a
region (Pak, Smirnov, arXiv:1011.4863; Jantzen, Smirnov, Smirnov, arXiv:1206.0546). The leading term of a
region is an integral of the same kind over the terms on its facet, so limits one after the other are
regions of regions.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from itertools import product

from ibpred.boundary.approach import Approach, is_positive_before, leading, valuation
from ibpred.boundary.expansion import ClosedForm
from ibpred.boundary.polytope import LowerFacet, lower_facets, separating_functional
from ibpred.exact.rational import Rational
from ibpred.family.definition import FamilyDefinition
from ibpred.family.polynomials import symanzik
from ibpred.iterated.transport import Infinity, Point

Coefficients = Mapping[tuple[int, ...], Rational]
"""Parameter monomial -> coefficient, a function of the ratios."""


@dataclass(frozen=True, order=True)
class Exponent:
    """A possible behaviour: for each small quantity u a factor ``u^(power + slope eps) (power series in u)``.

    Attributes
    ----------
    power
        Leading power at eps = 0 in each scale, then in the variable; higher ones follow in integer steps.
    slope
        Coefficient of eps, likewise.
    logs
        For each small quantity whether its logarithms may multiply this at generic eps.
    """

    power: tuple[Fraction, ...]
    slope: tuple[Fraction, ...]
    logs: tuple[bool, ...]


Behaviour = tuple[Exponent, ...]
"""All behaviours that an integral can have at a point."""


@dataclass(frozen=True)
class ParametricFamily:
    """U and F on a curve of kinematics, with parameters for all lines (numerators included).

    Attributes
    ----------
    dimension
        d0.
    first, second
        U and F.
    """

    dimension: int
    first: Coefficients
    second: Coefficients

    def substituted(self, values: Mapping[str, Rational]) -> ParametricFamily:
        """U and F on another curve: the ratios replaced."""
        first = {e: c.substitute(values) for e, c in self.first.items()}
        return ParametricFamily(
            self.dimension, first, {e: c.substitute(values) for e, c in self.second.items()}
        )


def parametric_family(family: FamilyDefinition, values: Mapping[str, Rational]) -> ParametricFamily:
    """U and F of a family in its ratios.

    Parameters
    ----------
    family
        The family.
    values
        Each invariant as an element of one field that holds the ratios: the unit +1 or -1, the others a
        function of the ratios.
    """
    # numerators take part as lines whose powers tend to negative integers
    everything = replace(family, lines=tuple(replace(line, numerator=False) for line in family.lines))
    first, second = symanzik(everything)
    return ParametricFamily(
        family.dimension,
        {e: c.substitute(values) for e, c in first.terms.items()},
        {e: v for e, c in second.terms.items() if (v := c.substitute(values))},
    )


def behaviour(family: ParametricFamily, powers: Sequence[int], approach: Approach) -> Behaviour | None:
    """What an integral can do at a point, on the sheet of the Euclidean region.

    Parameters
    ----------
    family
        U and F in terms of the scales and the variable of the approach.
    powers
        One power for each line; negative ones are numerators.
    approach
        The way there. Positive points and infinity are approached along the positive axis, on which all
        coefficients must be positive; negative ones from the positive axis through the upper or lower half
        plane.

    Returns
    -------
    Behaviour or None
        None where nothing is claimed.
    """
    sector = tuple(i for i, power in enumerate(powers) if power > 0)
    numerators = {i: -power for i, power in enumerate(powers) if power < 0}
    first, second = _restricted(family.first, sector), _restricted(family.second, sector)
    terms = [_Term(e, c, False) for e, c in first.items()] + [_Term(e, c, True) for e, c in second.items()]
    point = approach.point
    end: Point = Fraction(0) if not isinstance(point, Infinity) and point < 0 else point
    for term in terms:
        _, last = leading(term.coefficient, approach.scales)
        if not is_positive_before(last, approach.variable, end):
            return None
    start = _Expansion(
        tuple(Fraction(powers[i]) for i in sector),
        Fraction(family.dimension, 2),
        tuple(terms),
        _derivatives(family, sector, numerators),
        tuple(numerators.values()),
    )
    return _nested(start, approach, approach.scales)


@dataclass(frozen=True)
class _Term:
    """One term of U + F: exponents over the sector, coefficient, whether it belongs to F."""

    exponents: tuple[int, ...]
    coefficient: Rational
    massive: bool


Derivatives = Mapping[tuple[int, ...], Sequence[tuple[tuple[int, ...], Rational]]]


@dataclass(frozen=True)
class _Expansion:
    """An integral, or the leading term of one in a region."""

    powers: tuple[Fraction, ...]
    half: Fraction  # d0/2
    terms: tuple[_Term, ...]
    derivatives: Derivatives
    numerators: tuple[int, ...]


def _nested(state: _Expansion, approach: Approach, scales: Sequence[str]) -> Behaviour | None:
    border = isinstance(approach.point, Infinity) or approach.point == 0
    if not scales and not isinstance(approach.point, Infinity) and approach.point < 0:
        second = {t.exponents: t.coefficient for t in state.terms if t.massive}
        if not _separated(second, approach.variable, approach.point):
            return None
        return (Exponent((Fraction(0),), (Fraction(0),), (False,)),)
    name, point = (scales[0], Fraction(0)) if scales else (approach.variable, approach.point)
    regions = _regions(state, name, point)
    slopes = [slope for _, slope, _ in regions]
    found: dict[Exponent, None] = {}
    for power, slope, facet in regions:
        # regions with the same exponent need a further regulator, which leaves logarithms
        logs = slopes.count(slope) > 1
        if not scales:
            found[Exponent((power,), (slope,), (logs,))] = None
            continue
        inner = _nested(_leading_term(state, facet, name), approach, scales[1:])
        if inner is None:
            return None
        for exponent in inner:
            # the regulator reaches all that become small later, but not a point at finite distance
            later = [logs or more for more in exponent.logs]
            if not border:
                later[-1] = exponent.logs[-1]
            item = Exponent((power, *exponent.power), (slope, *exponent.slope), (logs, *later))
            found[item] = None
    return tuple(sorted(found))


def _regions(state: _Expansion, name: str, point: Point) -> list[tuple[Fraction, Fraction, LowerFacet]]:
    """Power, slope and facet of each region in one small quantity."""
    facets = lower_facets([(t.exponents, valuation(t.coefficient, name, point)) for t in state.terms])
    found = []
    for facet in facets:
        shift = _numerator_shift(facet, state.derivatives, state.numerators, name, point)
        if shift is not None:
            power = sum((v * a for v, a in zip(facet.normal, state.powers, strict=True)), Fraction(0))
            found.append((power - facet.offset * state.half + shift, facet.offset, facet))
    return found


def _leading_term(state: _Expansion, facet: LowerFacet, name: str) -> _Expansion:
    """The terms on a facet without the scale."""
    kept = []
    for term in state.terms:
        (power,), coefficient = leading(term.coefficient, (name,))
        if power + _along(facet, term.exponents) == facet.offset:
            kept.append(_Term(term.exponents, coefficient, term.massive))
    # of the derivatives all are kept: this can only lower the bound of the power
    derivatives = {
        order: [(r, leading(c, (name,))[1]) for r, c in terms] for order, terms in state.derivatives.items()
    }
    return replace(state, terms=tuple(kept), derivatives=derivatives)


def _along(facet: LowerFacet, exponents: Sequence[int]) -> Fraction:
    return sum((v * e for v, e in zip(facet.normal, exponents, strict=True)), Fraction(0))


def behaviour_of_closed_form(form: ClosedForm, approach: Approach) -> Behaviour:
    """The exponent of a closed form at a point: no logarithms at generic eps."""
    power = tuple(Fraction(v) for v in approach.orders(form.rational))
    slope = [Fraction(0)] * len(power)
    for letter, q in form.letters:
        for i, order in enumerate(approach.orders(letter)):
            slope[i] += q * order
    return (Exponent(power, tuple(slope), (False,) * len(power)),)


def _restricted(terms: Coefficients, sector: Sequence[int]) -> dict[tuple[int, ...], Rational]:
    """Terms without the parameters outside the sector, exponents over the sector only."""
    inside = set(sector)
    return {
        tuple(e[i] for i in sector): c
        for e, c in terms.items()
        if not any(n for i, n in enumerate(e) if i not in inside)
    }


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


def _derivatives(
    family: ParametricFamily, sector: Sequence[int], numerators: Mapping[int, int]
) -> Derivatives:
    """Terms of U + F by powers of the numerators' parameters: (exponents in the sector, coefficient)."""
    allowed = {*sector, *numerators}
    found: dict[tuple[int, ...], list[tuple[tuple[int, ...], Rational]]] = {}
    for terms in (family.first, family.second):
        for exponents, coefficient in terms.items():
            if any(n for i, n in enumerate(exponents) if i not in allowed):
                continue
            order = tuple(exponents[i] for i in numerators)
            found.setdefault(order, []).append((tuple(exponents[i] for i in sector), coefficient))
    return found


def _numerator_shift(
    facet: LowerFacet, derivatives: Derivatives, orders: tuple[int, ...], name: str, point: Point
) -> Fraction | None:
    """Least change of the power by numerators; None where the numerator makes the region vanish.

    A power -n of a line is an n-fold derivative of ``(U+F)^(-d/2)`` in its parameter at zero: products of
    derivatives of U + F, each with one more inverse power of U + F.
    """
    if not any(orders):
        return Fraction(0)
    cost: dict[tuple[int, ...], Fraction] = {}
    for order, terms in derivatives.items():
        if any(order):
            cost[order] = min(_along(facet, r) + valuation(c, name, point) for r, c in terms) - facet.offset
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
