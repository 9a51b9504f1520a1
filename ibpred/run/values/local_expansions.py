"""Integrals on a ray ``v = place + h direction``, h -> 0+, from their values at one distance.

The differential system of the masters does the rest, order by order in eps, so no epsilon-form is needed; the
values may come by any route, and the coefficients are as certain as these are.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import ceil

from ibpred.balls.accuracy import bits_for
from ibpred.balls.context import Ball
from ibpred.balls.decimal import ball_of_decimal
from ibpred.errors import PointError, PrecisionError, UnfinishedError
from ibpred.exact.rational import Rational
from ibpred.family.definition import Powers
from ibpred.numerics.laurent.distance import (
    DISTANCE,
    check_separated,
    integral_terms,
    lowest_power,
    needed_orders,
)
from ibpred.numerics.laurent.expanded import ExpandedSystem, expanded_system
from ibpred.numerics.laurent.laurent_line import spread
from ibpred.numerics.laurent.local_laurent import (
    Terms,
    local_system,
    master_terms,
    matched,
    matching_distance,
    order_depth,
)
from ibpred.numerics.value import Route
from ibpred.run.chain.chain import Chain
from ibpred.run.values.continued_values import Found, masters_at
from ibpred.run.values.form_values import form_values
from ibpred.run.values.rays import Ray

_SPARE_DIGITS = 8  # lost between the distance and the point
_SPARE_BITS = 160

Entries = Mapping[int, Rational]
"""Number of a master -> its coefficient in Q(eps, h)."""


@dataclass(frozen=True)
class LocalTerms:
    """Integrals near a point.

    Attributes
    ----------
    integrals
        For each integral: power of eps -> (power of h, power of log h) -> coefficient.
    route, certified
        How the values at a distance were obtained, and whether their radii are rigorous.
    """

    integrals: tuple[Mapping[int, Terms], ...]
    route: Route
    certified: bool


def entries_on(chain: Chain, ray: Ray, wanted: Sequence[Powers]) -> tuple[Entries, ...]:
    """Integrals in terms of the masters on a ray; the masters themselves where none is given.

    Raises
    ------
    PointError
        If the reduction is singular on the whole ray.
    UnfinishedError
        If a coefficient cannot be expanded in eps first and in h then.
    """
    if not wanted:
        return tuple({index: DISTANCE.one} for index in range(len(chain.masters().masters)))
    table = chain.reduction(tuple(dict.fromkeys(wanted)))
    values = ray.images() | {"d": DISTANCE.variable("eps") * -2 + chain.definition.dimension}
    found = []
    for powers in wanted:
        row = {}
        for index, coefficient in dict(table.reductions[powers]).items():
            try:
                row[index] = coefficient.substitute(values)
            except ZeroDivisionError:
                raise PointError(
                    f"the reduction is singular near {ray.text()}: {coefficient.denominator} vanishes"
                ) from None
        check_separated(list(row.values()))
        found.append(row)
    return tuple(found)


def local_terms(
    chain: Chain, ray: Ray, entries: Sequence[Entries], order: int, highest: int, digits: int
) -> LocalTerms:
    """Expand integrals on a ray.

    Parameters
    ----------
    chain
        The family's chain.
    ray
        The ray; singular points may lie at its start, not all along.
    entries
        See `entries_on`.
    order, highest
        Highest powers of eps and of h.
    digits
        Digits of the masters' values at a distance, about: those of the coefficients are for the caller to
        check.

    Raises
    ------
    PointError
        If the whole ray is singular, or no point on it can be reached.
    UnfinishedError
        If the system cannot be expanded, or no route to values is open.
    """
    system = chain.derivation().system
    top = needed_orders(entries, order)
    reach = highest - lowest_power([value for row in entries for value in row.values()])
    bits = bits_for(digits) + _SPARE_BITS
    first = expanded_system(system, 1)
    start = local_system(first, ray.place, ray.direction, ray.text())
    h = matching_distance(start)
    known = masters_near(chain, ray.at(h), top + spread(first), digits + _SPARE_DIGITS, bits)
    lowest = _lowest(first, known.masters)
    if lowest is None:
        return LocalTerms(tuple({} for _ in entries), known.route, known.certified)
    expanded = expanded_system(system, order_depth(first.shifts, lowest, max(top, lowest)))
    chain.progress.stage("expansion")
    local = local_system(expanded, ray.place, ray.direction, ray.text())
    constants = matched(local, h, known.masters, lowest, bits)
    masters = master_terms(local, constants, ceil(reach), bits)
    return LocalTerms(
        tuple(integral_terms(row, masters, order, highest, bits) for row in entries),
        known.route,
        known.certified,
    )


def _lowest(expanded: ExpandedSystem, masters: Sequence[Mapping[int, Ball]]) -> int | None:
    return min(
        (k + shift for value, shift in zip(masters, expanded.shifts, strict=True) for k in value),
        default=None,
    )


def masters_near(chain: Chain, point: Mapping[str, Fraction], highest: int, digits: int, bits: int) -> Found:
    """The masters at a regular point through ``eps^highest``, by whatever route there is.

    Raises
    ------
    UnfinishedError
        If there is none.
    """
    try:
        (values,) = form_values(chain, (point,), (), highest, digits)
    except PrecisionError:
        raise
    except UnfinishedError as error:
        chain.progress.stage(f"no values from an epsilon-form ({error})")
        return masters_at(chain, point, highest, digits, bits)
    masters = tuple({k: ball_of_decimal(b, bits) for k, b in value.epsilon.items()} for value in values)
    return Found(masters, Route.EPSILON_FORM, all(value.certified for value in values))
