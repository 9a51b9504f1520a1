"""Values of the canonical functions anywhere on the principal sheet."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

import flint

from ibpred.balls.context import Ball, complex_ball, precision
from ibpred.errors import InputError
from ibpred.numerics.forms.canonical import CanonicalSystem, Orders
from ibpred.numerics.forms.centre import Centre, Place, centre_at, centre_at_infinity
from ibpred.numerics.forms.path import Disc, Infinity, Point, Regular, Step, Target, plan, sharing
from ibpred.numerics.forms.series import carried_to, from_base_to


def evaluate_canonical(system: CanonicalSystem, constants: Orders, target: Target, bits: int) -> Orders:
    """The canonical functions at a target, order by order in eps.

    Parameters
    ----------
    system
        ``df = eps sum_l A_l dlog(q_l) f``.
    constants
        Boundary constants at the tangential base point x -> 0+: ``f = P exp(...) x^(eps A_0) c``;
        ``constants[k][i]`` is the coefficient of eps^k of c_i.
    target
        Where the functions are wanted.
    bits
        Working precision; the radii of the result say what it achieved.

    Returns
    -------
    ``f^(k)`` for k = 0 ... len(constants) - 1, rigorous given the system and the constants.

    Raises
    ------
    PointError
        If the target is a zero of a letter.
    """
    return evaluate_many(system, constants, (target,), bits)[0]


def evaluate_many(
    system: CanonicalSystem, constants: Orders, targets: Sequence[Target], bits: int
) -> tuple[Orders, ...]:
    """The canonical functions at several targets.

    Targets that lie in the disc of another one are reached with it: the way there and the series in the
    disc are computed once, so a curve costs as many continuations as discs cover it.

    Parameters
    ----------
    system, constants, bits
        As in `evaluate_canonical`.
    targets
        Where the functions are wanted, in any order.
    """
    for order, vector in enumerate(constants):
        if len(vector) != system.size:
            raise InputError(
                f"order {order} of the boundary constants has {len(vector)} entries, the system "
                f"{system.size} functions"
            )
    found: dict[Target, Orders] = {}
    for leader, group in sharing(system, targets):
        below = leader.half_turns < 0
        ends = [(target.value, Fraction(0)) for target in group]
        steps = plan(system, leader)
        for target, values in zip(group, follow_to(system, constants, steps, ends, below, bits), strict=True):
            found[target] = values
    return tuple(found[target] for target in targets)


def follow(
    system: CanonicalSystem, constants: Orders, steps: tuple[Step, ...], below: bool, bits: int
) -> Orders:
    """Carry the solution along a plan (see `ibpred.numerics.forms.path.plan`).

    Parameters
    ----------
    steps
        The plan.
    below
        Whether it runs in the lower half plane, so that negative numbers have the argument -pi.
    """
    return follow_to(system, constants, steps, (steps[-1].end,), below, bits)[0]


def follow_to(
    system: CanonicalSystem,
    constants: Orders,
    steps: tuple[Step, ...],
    ends: Sequence[Point],
    below: bool,
    bits: int,
) -> tuple[Orders, ...]:
    """Carry the solution along a plan into its last disc and on to several points there."""
    values: tuple[Orders, ...] = (constants,)
    start: Point | None = None
    for number, step in enumerate(steps, start=1):
        centre = _centre(system, step.disc, bits)
        goals = ends if number == len(steps) else (step.end,)
        places = [_place(step.disc, goal, below, bits) for goal in goals]
        if start is None:
            values = from_base_to(centre, constants, places, bits)
        else:
            values = carried_to(centre, _place(step.disc, start, below, bits), values[0], places, bits)
        start = step.end
    return values


def _centre(system: CanonicalSystem, disc: Disc, bits: int) -> Centre:
    if isinstance(disc, Infinity):
        return centre_at_infinity(system, bits)
    if isinstance(disc, Regular):
        return centre_at(system, complex_ball(*disc.point, bits), None, bits)
    return centre_at(system, complex_ball(disc.point, 0, bits), disc.letter, bits)


def _place(disc: Disc, point: Point, below: bool, bits: int) -> Place:
    """Local coordinate and its logarithm, the argument continuous in the closed half plane."""
    if isinstance(disc, Regular):
        real, imaginary = point[0] - disc.point[0], point[1] - disc.point[1]
        return Place(complex_ball(real, imaginary, bits), flint.acb(0))
    if isinstance(disc, Infinity):
        with precision(bits):
            return Place(1 / complex_ball(*point, bits), -_logarithm(*point, below, bits))
    real = point[0] - disc.point
    return Place(complex_ball(real, point[1], bits), _logarithm(real, point[1], below, bits))


def _logarithm(real: Fraction, imaginary: Fraction, below: bool, bits: int) -> Ball:
    with precision(bits):
        if imaginary == 0 and real < 0:
            side = -1 if below else 1
            return flint.acb(complex_ball(-real, 0, bits).log().real, side * flint.arb.pi())
        return complex_ball(real, imaginary, bits).log()
