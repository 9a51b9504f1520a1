"""Expansions of integrals at singular points, as results of their own."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

from ibpred.balls.accuracy import is_accurate
from ibpred.balls.decimal import DecimalBall, decimal_ball
from ibpred.errors import PointError
from ibpred.family.definition import Powers
from ibpred.family.signs import masses
from ibpred.numerics.laurent.local_laurent import Terms
from ibpred.numerics.value import Route
from ibpred.reduction.wanted import check_powers
from ibpred.run.chain.chain import Chain
from ibpred.run.values.local_expansions import LocalTerms, entries_on, local_terms
from ibpred.run.values.rays import Ray

_ROUNDS = 3


@dataclass(frozen=True)
class Approach:
    """``name = place + side * h`` with h -> 0+; `side` is 1 or -1."""

    name: str
    place: Fraction
    side: int

    def __str__(self) -> str:
        return f"{self.name} = {self.place} {'+' if self.side > 0 else '-'} h"


@dataclass(frozen=True)
class Expansion:
    """An integral near a singular point.

    Attributes
    ----------
    powers
        The integral.
    epsilon
        Power of eps -> (power of h, power of log h) -> coefficient. Terms whose ball holds zero are left out.
    certified
        Whether the radii are rigorous, or estimates.
    route
        How the values were obtained that fix the solution.
    """

    powers: Powers
    epsilon: Mapping[int, Mapping[tuple[Fraction, int], DecimalBall]]
    certified: bool
    route: Route


def expand(
    chain: Chain,
    fixed: Mapping[str, Fraction],
    approach: Approach,
    wanted: Sequence[Powers],
    order: int,
    highest: int,
    digits: int,
) -> tuple[Expansion, ...]:
    """Expand integrals in the distance from a point, which may be singular.

    Parameters
    ----------
    chain
        The family's chain.
    fixed
        The other invariants.
    approach
        Which invariant goes where, from which side.
    wanted
        Integrals; the masters where none is given.
    order, highest
        Highest powers of eps and of the distance.
    digits
        Digits of the coefficients.

    Returns
    -------
    One expansion an integral. Where the digits wanted are not reached after several attempts with more, the
    radii say what was.

    Raises
    ------
    PointError
        If the point is incomplete, or the whole ray is singular.
    UnfinishedError
        If there is no route to values near the point, or exponents are not rational.
    """
    family = chain.definition
    for powers in wanted:
        check_powers(family, powers)
    names = [invariant.name for invariant in family.invariants]
    if approach.name not in names:
        raise PointError(
            f"{approach.name!r} cannot be approached; invariants that can: {', '.join(names) or 'none'}"
        )
    if approach.name in fixed:
        raise PointError(f"{approach.name} is given twice, by --at and by --approach")
    place = {**fixed, approach.name: approach.place}
    for name in place:
        if name not in names:
            raise PointError(f"{family.name} has no invariant {name!r}; known are {', '.join(names)}")
    missing = [name for name in names if name not in place]
    if missing:
        raise PointError(f"the point lacks a value for {', '.join(missing)}; give every invariant")
    if approach.name in masses(family) and approach.place == 0 and approach.side < 0:
        raise PointError(f"the squared mass {approach.name} would be negative; approach it from above")
    ray = Ray({name: place[name] for name in names}, {approach.name: Fraction(approach.side)})
    entries = entries_on(chain, ray, wanted)
    asked = digits
    for round_ in range(_ROUNDS):
        found = local_terms(chain, ray, entries, order, highest, asked)
        if round_ == _ROUNDS - 1 or not _missing(found, digits):
            break
        chain.progress.stage(f"{_missing(found, digits)} coefficients lack digits; once more with more")
        asked += digits // 2 + 12
    labels = [tuple(powers) for powers in wanted] or list(chain.masters().masters)
    return tuple(
        Expansion(
            powers,
            _nonzero(integral, digits),
            found.certified,
            found.route,
        )
        for powers, integral in zip(labels, found.integrals, strict=True)
    )


def _nonzero(
    integral: Mapping[int, Terms], digits: int
) -> dict[int, dict[tuple[Fraction, int], DecimalBall]]:
    """Decimals of the terms that do not hold zero, from the lowest power of eps that has any."""
    found: dict[int, dict[tuple[Fraction, int], DecimalBall]] = {}
    for power, terms in sorted(integral.items()):
        kept = {key: decimal_ball(b, digits + 2) for key, b in sorted(terms.items()) if not b.contains(0)}
        if kept or found:
            found[power] = kept
    return found


def _missing(found: LocalTerms, digits: int) -> int:
    return sum(
        not is_accurate(ball, digits)
        for integral in found.integrals
        for terms in integral.values()
        for ball in terms.values()
    )
