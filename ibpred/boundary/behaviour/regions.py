"""How an integral may behave at the border of the Euclidean region, read off its parametric representation.

``I ~ int prod_i dx_i x_i^(a_i - 1) (U + F)^(-d/2)`` (Lee, Pomeransky, arXiv:1308.6676). Where all
coefficients are positive, the expansion by regions (Beneke, Smirnov, hep-ph/9711391) is geometric: each
lower facet of the Newton polytope of U + F with the power of the small quantity as an extra direction is a
region (Pak, Smirnov, arXiv:1011.4863; Jantzen, Smirnov, Smirnov, arXiv:1206.0546). The leading term of a
region is an integral of the same kind over the terms on its facet, so limits one after the other are
regions of regions.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from functools import cached_property
from math import factorial, prod

from ibpred.boundary.behaviour.approach import Approach, is_positive_before, leading, leading_at, valuation
from ibpred.boundary.behaviour.expansion import ClosedForm, on_line
from ibpred.boundary.behaviour.gamma import Piece, parametric_form
from ibpred.boundary.behaviour.polytope import LowerFacet, lower_facets
from ibpred.boundary.behaviour.thresholds import Monomials, is_separated, threshold_exponents
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
    loops, dimension
        L and d0.
    first, second
        U and F.
    """

    loops: int
    dimension: int
    first: Coefficients
    second: Coefficients

    def substituted(self, values: Mapping[str, Rational]) -> ParametricFamily:
        """U and F on another curve: the ratios replaced."""
        first = {e: c.substitute(values) for e, c in self.first.items()}
        second = {e: c.substitute(values) for e, c in self.second.items()}
        return replace(self, first=first, second=second)


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
        len(family.loops),
        family.dimension,
        {e: c.substitute(values) for e, c in first.terms.items()},
        {e: v for e, c in second.terms.items() if (v := c.substitute(values))},
    )


@dataclass(frozen=True)
class Region:
    """One region: its behaviour and the integral that stands in front of its leading term.

    Attributes
    ----------
    exponent
        The behaviour.
    leading
        What multiplies ``prod u^(power + slope eps)``; None where it is not read off.
    """

    exponent: Exponent
    leading: LeadingTerm | None


@dataclass(frozen=True)
class LeadingTerm:
    """The leading term of a region, a number at every eps.

    Attributes
    ----------
    loops, dimension
        L and d0.
    lines
        The powers of all lines.
    terms
        The part of U + F on the facet, its coefficients numbers.
    pieces
        What is integrated with it.
    """

    loops: int
    dimension: int
    lines: tuple[Fraction, ...]
    terms: Coefficients
    pieces: tuple[Piece, ...]

    @cached_property
    def closed(self) -> tuple[tuple[Fraction, ClosedForm], ...] | None:
        """Its pieces as multiples of products of Gamma functions; None where they are none."""
        field = next(iter(self.terms.values())).ring
        found = []
        for piece in self.pieces:
            form = parametric_form(self.terms, self.loops, self.dimension, self.lines, piece)
            if form is None:
                return None
            found.append((piece.coefficient.to_fraction(), on_line(form, {}, field)))
        return tuple(found)


def behaviour(family: ParametricFamily, powers: Sequence[int], approach: Approach) -> Behaviour | None:
    """What an integral can do at a point, on the sheet of the Euclidean region; see `regions`."""
    found = regions(family, powers, approach)
    return None if found is None else tuple(sorted({region.exponent for region in found}))


def regions(family: ParametricFamily, powers: Sequence[int], approach: Approach) -> tuple[Region, ...] | None:
    """The regions of an integral at a point, on the sheet of the Euclidean region.

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
    tuple or None
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
        family.loops,
        family.dimension,
        tuple(Fraction(power) for power in powers),
        tuple(terms),
        _pieces(family, powers, sector, numerators),
    )
    return _nested(start, approach, approach.scales)


@dataclass(frozen=True)
class _Term:
    """One term of U + F: exponents over the sector, coefficient, whether it belongs to F."""

    exponents: tuple[int, ...]
    coefficient: Rational
    massive: bool


@dataclass(frozen=True)
class _Expansion:
    """An integral, or the leading term of one in a region."""

    loops: int
    dimension: int
    lines: tuple[Fraction, ...]
    terms: tuple[_Term, ...]
    pieces: tuple[Piece, ...]


def _nested(state: _Expansion, approach: Approach, scales: Sequence[str]) -> tuple[Region, ...] | None:
    border = _is_border(state, approach)
    if not scales and not isinstance(approach.point, Infinity) and approach.point < 0:
        return _at_negative(state, approach.variable, approach.point)
    name, point = (scales[0], Fraction(0)) if scales else (approach.variable, approach.point)
    facets = lower_facets([(t.exponents, valuation(t.coefficient, name, point)) for t in state.terms])
    slopes = [facet.offset for facet in facets]
    found: list[Region] = []
    for facet in facets if state.pieces else ():
        power, after = _leading_term(state, facet, name, point)
        slope = facet.offset
        # regions with the same exponent need a further regulator, which leaves logarithms
        logs = slopes.count(slope) > 1
        if not scales:
            terms = {t.exponents: t.coefficient for t in after.terms}
            term = LeadingTerm(after.loops, after.dimension, after.lines, terms, after.pieces)
            found.append(Region(Exponent((power,), (slope,), (logs,)), term))
            continue
        inner = _nested(after, approach, scales[1:])
        if inner is None:
            return None
        for region in inner:
            exponent = region.exponent
            # the regulator reaches all that become small later, but not a point with finite coefficients
            later = [logs or more for more in exponent.logs]
            if not border:
                later[-1] = exponent.logs[-1]
            item = Exponent((power, *exponent.power), (slope, *exponent.slope), (logs, *later))
            found.append(Region(item, region.leading))
    return tuple(found)


def _at_negative(state: _Expansion, variable: str, point: Fraction) -> tuple[Region, ...] | None:
    """Behaviour at a negative point: that of a regular one, or that at a threshold."""
    second = {t.exponents: t.coefficient for t in state.terms if t.massive}
    if is_separated(second, variable, point):
        return (Region(Exponent((Fraction(0),), (Fraction(0),), (False,)), None),)
    pieces = []
    for piece in state.pieces:
        powers = tuple(int(power) for power in piece.powers)
        pieces.append(Monomials(valuation(piece.coefficient, variable, point), powers, piece.raised))
    terms = {t.exponents: t.coefficient for t in state.terms}
    found = threshold_exponents(terms, pieces, state.dimension, variable, point)
    if found is None:
        return None
    slopes = [slope for _, slope in found]
    # parts that share an exponent may need a further regulator
    exponents = {Exponent((power,), (slope,), (slopes.count(slope) > 1,)) for power, slope in found}
    return tuple(Region(exponent, None) for exponent in sorted(exponents))


def _is_border(state: _Expansion, approach: Approach) -> bool:
    """Whether some coefficient tends to zero or infinity at the point of the variable."""
    if isinstance(approach.point, Infinity) or approach.point == 0:
        return True
    lasts = [leading(term.coefficient, approach.scales)[1] for term in state.terms]
    return any(valuation(last, approach.variable, approach.point) for last in lasts)


def _leading_term(
    state: _Expansion, facet: LowerFacet, name: str, point: Point
) -> tuple[Fraction, _Expansion]:
    """Power of a region in a small quantity, and the terms and pieces that make up its leading term."""
    kept = []
    for term in state.terms:
        power, coefficient = leading_at(term.coefficient, name, point)
        if power + _along(facet, term.exponents) == facet.offset:
            kept.append(_Term(term.exponents, coefficient, term.massive))
    half = Fraction(state.dimension, 2)
    heights = []
    for piece in state.pieces:
        power, coefficient = leading_at(piece.coefficient, name, point)
        height = power + _along(facet, piece.powers) - facet.offset * (half + piece.raised)
        heights.append((height, replace(piece, coefficient=coefficient)))
    least = min(height for height, _ in heights)
    pieces = tuple(piece for height, piece in heights if height == least)
    return least, replace(state, terms=tuple(kept), pieces=pieces)


def _along(facet: LowerFacet, exponents: Sequence[int | Fraction]) -> Fraction:
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


def _pieces(
    family: ParametricFamily, powers: Sequence[int], sector: Sequence[int], numerators: Mapping[int, int]
) -> tuple[Piece, ...]:
    """What stands in the parametric integral: one piece, or those that numerators bring.

    A power -n of a line is an n-fold derivative in minus its parameter y at zero. With ``U + F = G + D`` and
    D of order y it acts on ``sum_m (-1)^m Gamma(d/2 + m) / (Gamma(d/2) m!) G^(-d/2 - m) D^m``.
    """
    field = next(iter(family.first.values())).ring
    orders = tuple(numerators.values())
    allowed = {*sector, *numerators}
    change: list[tuple[tuple[int, ...], tuple[int, ...], Rational]] = []
    for terms in (family.first, family.second):
        for exponents, coefficient in terms.items():
            order = tuple(exponents[i] for i in numerators)
            if any(order) and not any(n for i, n in enumerate(exponents) if i not in allowed):
                change.append((order, tuple(exponents[i] for i in sector), coefficient))
    power_of_change: dict[tuple[tuple[int, ...], tuple[int, ...]], Rational] = {
        ((0,) * len(orders), (0,) * len(sector)): field.one
    }
    wanted = Fraction(prod(factorial(n) for n in orders)) * (-1) ** sum(orders)
    found = []
    for m in range(sum(orders) + 1):
        for (order, shift), coefficient in power_of_change.items():
            if order == orders and coefficient:
                sizes = tuple(Fraction(powers[i] + n) for i, n in zip(sector, shift, strict=True))
                found.append(Piece(coefficient * (wanted * (-1) ** m / factorial(m)), sizes, m))
        power_of_change = _product(power_of_change, change, orders)
    return tuple(found)


def _product(
    left: Mapping[tuple[tuple[int, ...], tuple[int, ...]], Rational],
    right: Sequence[tuple[tuple[int, ...], tuple[int, ...], Rational]],
    orders: Sequence[int],
) -> dict[tuple[tuple[int, ...], tuple[int, ...]], Rational]:
    """Product of polynomials, without powers of the numerators' parameters beyond those wanted."""
    found: dict[tuple[tuple[int, ...], tuple[int, ...]], Rational] = {}
    for (order, shift), value in left.items():
        for more, further, factor in right:
            total = tuple(a + b for a, b in zip(order, more, strict=True))
            if all(t <= n for t, n in zip(total, orders, strict=True)):
                key = (total, tuple(a + b for a, b in zip(shift, further, strict=True)))
                found[key] = found[key] + value * factor if key in found else value * factor
    return found
