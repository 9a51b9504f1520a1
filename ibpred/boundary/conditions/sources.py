"""What canonical functions are made of near a point: closed forms, and regions of other masters."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from fractions import Fraction

from ibpred.boundary.behaviour.approach import Approach, is_positive_before, leading, near
from ibpred.boundary.behaviour.expansion import ClosedForm
from ibpred.boundary.behaviour.regions import (
    Exponent,
    ParametricFamily,
    Region,
    behaviour_of_closed_form,
    regions,
)
from ibpred.boundary.conditions.local import Contribution, contributions
from ibpred.exact.rational import Rational
from ibpred.family.definition import Powers
from ibpred.iterated.alphabet import fraction_root, is_positive_at
from ibpred.iterated.transport import Infinity, Point

Slopes = tuple[Fraction | None, ...]


@dataclass(frozen=True)
class Master:
    """What is known of one master integral in the Euclidean region.

    Attributes
    ----------
    label
        Its name, for messages.
    closed
        Its closed form, where there is one.
    powers
        Its powers, from which its behaviour is read off; None where nothing shall be claimed.
    behaviours
        How it may behave at points of an edge without scales, where this is known beforehand.
    at_infinity
        Likewise where the ratio tends to minus infinity, reached through the upper half plane; None where
        this is not known.
    """

    label: str
    closed: ClosedForm | None
    powers: Powers | None
    behaviours: Mapping[Point, tuple[Region, ...]] = field(default_factory=dict)
    at_infinity: tuple[Region, ...] | None = None


@dataclass(frozen=True)
class Known:
    """What is known of one master at a point: its expansion, or its regions.

    Attributes
    ----------
    closed
        Its closed form with the distance to the point in place of the variable; None where its value is not
        to be used.
    regions
        How it may behave, where there is no such form.
    """

    closed: ClosedForm | None
    regions: tuple[Region, ...]


@dataclass(frozen=True)
class _Part:
    """One master in a function, without a value of its own."""

    regions: tuple[Region, ...]
    orders: tuple[Fraction, ...]  # of the factor in front of it
    factor: Rational | None  # and its leading coefficient, a function of eps; None where not rational


@dataclass(frozen=True)
class Sources:
    """What one function is made of.

    Attributes
    ----------
    values
        Closed forms, expanded.
    parts
        Other masters.
    """

    values: tuple[Contribution, ...]
    parts: tuple[_Part, ...]

    def allowed(self, slopes: Slopes) -> tuple[Exponent, ...]:
        """Behaviours of the masters without values that can show up at u^0 in one class."""
        return tuple(region.exponent for part in self.parts for region in _reaching(part, slopes))

    def leading_values(self, slopes: Slopes) -> tuple[Contribution, ...] | None:
        """All that masters without values bring at u^0 in one class.

        Returns
        -------
        tuple or None
            None where it is not known: a region's leading term is no product of Gamma functions or needs a
            further regulator, or terms beyond the leading one take part.
        """
        found = []
        for part in self.parts:
            for region in _reaching(part, slopes):
                exponent = region.exponent
                total = [p + n for p, n in zip(exponent.power, part.orders, strict=True)]
                if any(total) or any(exponent.logs) or region.leading is None or part.factor is None:
                    return None
                pieces = region.leading.closed
                if pieces is None:
                    return None
                for number, closed in pieces:
                    coefficient = part.factor * closed.rational * number
                    zero = (Fraction(0),) * len(total)
                    found.append(Contribution(zero, exponent.slope, coefficient, closed))
        return tuple(found)


def _reaching(part: _Part, slopes: Slopes) -> list[Region]:
    return [
        region
        for region in part.regions
        if region.exponent.slope == slopes and _reaches_zero(region.exponent.power, part.orders)
    ]


def _reaches_zero(powers: Sequence[Fraction], shift: Sequence[Fraction]) -> bool:
    """Whether powers in integer steps above ``powers + shift`` (lexicographically) can all be zero."""
    total = [power + more for power, more in zip(powers, shift, strict=True)]
    if any(value.denominator != 1 for value in total):
        return False
    # below a leading term the next powers are not known: any integer may occur there
    return next((value < 0 for value in total if value), True)


def known_at(master: Master, family: ParametricFamily | None, approach: Approach) -> Known | None:
    """What is known of a master at a point; None where nothing is."""
    point = approach.point
    if master.closed is not None:
        constant = _is_constant(master.closed, approach.variable)
        if constant or isinstance(point, Infinity) or point >= 0:
            seen = replace(approach, point=Fraction(0)) if constant else approach
            closed = master.closed.substituted({approach.variable: _distance(master.closed, seen)})
            if all(_is_positive(letter, seen) for letter, _ in master.closed.letters):
                return Known(closed, ())
        exponents = behaviour_of_closed_form(master.closed, approach)
        return Known(None, tuple(Region(exponent, None) for exponent in exponents))
    if not approach.scales and point in master.behaviours:
        return Known(None, master.behaviours[point])
    if master.powers is None or family is None:
        return None
    found = regions(family, master.powers, approach)
    return None if found is None else Known(None, found)


def sources(
    known: Sequence[Known | None],
    entries: Sequence[Rational],
    radicands: Sequence[Rational],
    approach: Approach,
) -> Sources | None:
    """What ``sqrt(product of the radicands) sum_j entries[j] I_j`` is made of.

    None where nothing is known of one of the masters. The root is positive where the approach begins.
    """
    values: list[Contribution] = []
    parts: list[_Part] = []
    names = (*approach.scales, approach.variable)
    shift, number = _root_at(radicands, approach)
    moved = tuple(near(q, approach.variable, approach.point) for q in radicands)
    for item, entry in zip(known, entries, strict=True):
        if not entry:
            continue
        if item is None:
            return None
        if item.closed is not None and number is not None:
            factor = near(entry, approach.variable, approach.point)
            values += contributions(factor, item.closed, names, moved)
            continue
        orders, leading_factor = approach.leading(entry)
        total = tuple(a + b for a, b in zip(orders, shift, strict=True))
        regions_ = item.regions if item.closed is None else _exponents_only(item.closed, approach)
        parts.append(_Part(regions_, total, None if number is None else leading_factor * number))
    return Sources(tuple(values), tuple(parts))


def _exponents_only(closed: ClosedForm, approach: Approach) -> tuple[Region, ...]:
    """The behaviour of a closed form in which the variable is the distance to the point."""
    start = Approach(approach.scales, approach.variable, Fraction(0))
    return tuple(Region(exponent, None) for exponent in behaviour_of_closed_form(closed, start))


def _root_at(
    radicands: Sequence[Rational], approach: Approach
) -> tuple[tuple[Fraction, ...], Fraction | None]:
    """Orders and leading coefficient of a product's root; None where that is not known to be rational."""
    orders = [Fraction(0)] * (len(approach.scales) + 1)
    square, real = Fraction(1), True
    for radicand in radicands:
        powers, coefficient = approach.leading(radicand)
        orders = [a + Fraction(b, 2) for a, b in zip(orders, powers, strict=True)]
        square *= coefficient.to_fraction()
        real = real and keeps_root(radicand, approach)
    return tuple(orders), fraction_root(square) if real else None


def keeps_root(radicand: Rational, approach: Approach) -> bool:
    """Whether a root that is positive where an approach begins is so up to the point."""
    last = leading(radicand, approach.scales)[1]
    if approach.variable not in last.variables():
        return last.to_fraction() > 0
    if not isinstance(approach.point, Infinity) and approach.point < 0:
        return False
    one = last.ring.context.constant(1)
    factors = [last.ring.fraction(polynomial, one) for polynomial, _ in last.factors()[1]]
    return is_positive_at(last, (approach.variable,)) and all(
        is_positive_before(
            u if is_positive_at(u, (approach.variable,)) else -u, approach.variable, approach.point
        )
        for u in factors
    )


def _is_constant(form: ClosedForm, variable: str) -> bool:
    """Whether a closed form does not change along an edge."""
    return not any(
        variable in v.variables() for v in (form.rational, *(letter for letter, _ in form.letters))
    )


def _distance(form: ClosedForm, approach: Approach) -> Rational:
    """The variable in terms of the distance to the point."""
    return near(form.rational.ring.variable(approach.variable), approach.variable, approach.point)


def _is_positive(letter: Rational, approach: Approach) -> bool:
    """Whether a letter's leading term in the scales is positive on the way to the point."""
    return is_positive_before(leading(letter, approach.scales)[1], approach.variable, approach.point)
