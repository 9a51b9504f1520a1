"""Values on singularities: the limit of the expansion there, where it exists.

Where the terms of the parametric representation show that the integrals are regular at the point on the sheet
of the Euclidean region, the other local solutions are absent for sure. Elsewhere (thresholds) they are found
absent to the digits wanted, and the value is not called certified.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction

import flint

from ibpred.balls.accuracy import is_accurate
from ibpred.balls.context import Ball
from ibpred.balls.decimal import decimal_ball
from ibpred.boundary.behaviour.approach import Approach
from ibpred.boundary.behaviour.regions import Exponent, behaviour, parametric_family
from ibpred.errors import PointError, PrecisionError
from ibpred.exact.rational import Rational
from ibpred.family.definition import Powers
from ibpred.family.signs import euclidean_signs, masses
from ibpred.numerics.laurent.distance import DISTANCE
from ibpred.numerics.laurent.laurent_line import regular_locus
from ibpred.numerics.laurent.local_laurent import Terms
from ibpred.numerics.value import Route, Value
from ibpred.run.chain.chain import Chain
from ibpred.run.values.local_expansions import entries_on, local_terms
from ibpred.run.values.points import euclidean_point
from ibpred.run.values.rays import Ray

_ROUNDS = 3
_REGULAR = (Exponent((Fraction(0),), (Fraction(0),), (False,)),)


def is_singular(chain: Chain, point: Mapping[str, Fraction]) -> bool:
    """Whether a complete point lies on the singular locus, or an invariant vanishes there.

    With a single invariant there is nothing to expand in: its powers are all there is.
    """
    names = [invariant.name for invariant in chain.definition.invariants]
    if len(names) < 2 or set(point) != set(names):
        return False
    return any(not value for value in point.values()) or bool(_vanishing(chain, point))


def _vanishing(chain: Chain, point: Mapping[str, Fraction]) -> list[Rational]:
    return [
        letter
        for letter in regular_locus(chain.derivation().system)
        if not letter.substitute({**point, "d": 0})
    ]


def limit_values(
    chain: Chain, point: Mapping[str, Fraction], wanted: Sequence[Powers], order: int, digits: int
) -> tuple[Value, ...]:
    """Values at a singular point; see `ibpred.run.values.evaluate.evaluate_points`.

    Raises
    ------
    PointError
        If an integral has no limit there, or one that depends on the direction.
    UnfinishedError
        If there is no route to values near the point.
    """
    ray = _ray(chain, point)
    regular = _is_regular(chain, ray)
    if not regular:
        _check_directions(chain, point)
    # a power h^(k eps) with a vanishing coefficient shows as a logarithm one order later
    further = order if regular else order + 1
    entries = entries_on(chain, ray, wanted)
    labels = [tuple(powers) for powers in wanted] or list(chain.masters().masters)
    asked = digits
    for round_ in range(_ROUNDS):
        last = round_ == _ROUNDS - 1
        found = local_terms(chain, ray, entries, further, 0, asked)
        seen = [_seen(terms, digits) for terms in found.integrals]
        for powers, problem in zip(labels, seen, strict=True):
            if problem is not None and (problem[3] or last):
                raise _no_limit(chain, point, powers, problem)
        limits = [_constant(terms, order) for terms in found.integrals]
        missing = any(not is_accurate(ball, digits) for limit in limits for ball in limit.values())
        if last or not (missing or any(seen)):
            break
        chain.progress.stage("the limit lacks digits; once more with more")
        asked += digits // 2 + 12
    return tuple(
        Value(
            powers,
            {k: decimal_ball(ball, digits + 2) for k, ball in limit.items()},
            certified=found.certified and regular,
            route=Route.LIMIT,
        )
        for powers, limit in zip(labels, limits, strict=True)
    )


def _ray(chain: Chain, point: Mapping[str, Fraction]) -> Ray:
    """Where the point is approached from: the Euclidean region, else along one invariant."""
    family = chain.definition
    names = [invariant.name for invariant in family.invariants]
    signs = euclidean_signs(family)
    directions: list[dict[str, Fraction]] = []
    if signs is not None:
        base = euclidean_point(family, signs)
        directions.append({name: base[name] - point[name] for name in names})
    directions += [{name: Fraction(side)} for name in names for side in (-1, 1)]
    letters = regular_locus(chain.derivation().system)
    of_masses = masses(family)
    for direction in directions:
        ray = Ray(dict(point), direction)
        images = ray.images() | {"d": DISTANCE.zero}
        positive = all(point[name] or direction.get(name, 0) > 0 for name in of_masses)
        if positive and all(letter.substitute(images) for letter in letters):
            return ray
    raise PointError(
        f"no way leads to {Ray(point, {}).text()} that is not singular all along; expand near it with "
        "--approach"
    )


def _is_regular(chain: Chain, ray: Ray) -> bool:
    """Whether every master's parametric representation shows a regular point, on the Euclidean sheet."""
    family = chain.definition
    representation = parametric_family(family, ray.images())
    approach = Approach((), "h", Fraction(0))
    return all(behaviour(representation, powers, approach) == _REGULAR for powers in chain.masters().masters)


def _check_directions(chain: Chain, point: Mapping[str, Fraction]) -> None:
    """One smooth singularity has one limit; where several meet it may depend on the direction."""
    letters = _vanishing(chain, point)
    text = Ray(point, {}).text()
    if len(letters) > 1:
        raise PointError(
            f"the singularities {', '.join(f'{letter} = 0' for letter in letters)} meet at {text}, where "
            "limits may depend on the direction; expand near the point with --approach"
        )
    for letter in letters:
        slopes = (letter.derivative(name).substitute({**point, "d": 0}) for name in point)
        if not any(slopes):
            raise PointError(
                f"the singularity {letter} = 0 is not smooth at {text}, where limits may depend on the "
                "direction; expand near the point with --approach"
            )


_Problem = tuple[int, Fraction, int, bool]
"""Power of eps, power of h, power of log h; whether the coefficient is seen to differ from zero."""


def _seen(integral: Mapping[int, Terms], digits: int) -> _Problem | None:
    """The first term without a limit that is not seen to vanish to the digits."""
    for order, terms in sorted(integral.items()):
        for (power, log), ball in sorted(terms.items(), key=lambda item: item[0]):
            if (power < 0 or (power == 0 and log > 0)) and not _vanishes(ball, digits):
                return order, power, log, not ball.contains(0)
    return None


def _vanishes(ball: Ball, digits: int) -> bool:
    return bool(ball.contains(0)) and is_accurate(ball, digits)


def _no_limit(chain: Chain, point: Mapping[str, Fraction], powers: Powers, problem: _Problem) -> Exception:
    order, power, log, certain = problem
    factors = [f"h^({power})"] if power else []
    factors += [f"log(h)^{log}" if log > 1 else "log(h)"] if log else []
    label = f"{chain.definition.name}({','.join(map(str, powers))})"
    if not certain:
        return PrecisionError(
            f"whether {label} has a limit at {Ray(point, {}).text()} is not seen at the digits reached; ask "
            "for more digits"
        )
    return PointError(
        f"{label} has no limit at the singular point {Ray(point, {}).text()}: at distance h it contains "
        f"{' '.join(factors)} at eps^{order}; expand near the point with --approach"
    )


def _constant(integral: Mapping[int, Terms], order: int) -> dict[int, Ball]:
    """Coefficients of h^0 through ``eps^order``, without leading balls that hold zero."""
    kept: dict[int, Ball] = {}
    for power, terms in sorted(integral.items()):
        ball = terms.get((Fraction(0), 0), flint.acb(0))
        if power <= order and (kept or not ball.contains(0)):
            kept[power] = ball
    return kept
