"""Boundary constants of regions of real kinematics that no i0 leads to from the region of the solution.

See `ibpred.numerics.forms.channels`. All of them are recognised from values at one point of the region.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from fractions import Fraction

import flint

from ibpred.balls.accuracy import bits_for
from ibpred.balls.context import Ball, precision
from ibpred.balls.decimal import ball_of_decimal
from ibpred.boundary.conditions.explore import BoundaryProblem
from ibpred.boundary.conditions.fix import Boundary, Fitted, lowest_orders
from ibpred.epsform.form import EpsilonForm
from ibpred.errors import BoundaryError
from ibpred.family.units import unit_exponent
from ibpred.iterated.constants.series import eps_valuation
from ibpred.numerics.forms.back_to_base import constants_at_base
from ibpred.numerics.forms.canonical import canonical_system
from ibpred.numerics.forms.channels import Channel
from ibpred.numerics.forms.masters import unit_factors
from ibpred.numerics.forms.path import Target
from ibpred.run.chain.chain import Chain
from ibpred.run.constants.fitted import DIGITS, ODDS, canonical_values, generators_of, values_at


def channel_boundary(chain: Chain, problem: BoundaryProblem, channel: Channel) -> Boundary:
    """The constants of a region, all of them fitted.

    Raises
    ------
    UnfinishedError
        If the masters have no values in the region, or a constant is not recognised.
    """
    form = problem.form
    ratio = channel.ratio()
    point = _point(chain, form, channel, ratio)
    first = min(lowest_orders(problem))
    needed = problem.weight - min(eps_valuation(e) for row in form.inverse for e in row if e)
    failure: BoundaryError | None = None
    for digits in DIGITS:
        known = values_at(chain, point, needed, digits)
        bits = 2 * bits_for(digits)
        masters = _at_unit(
            chain, channel, [{k: ball_of_decimal(v, bits) for k, v in m.items()} for m in known.values], bits
        )
        values = canonical_values(form, {form.variables[0]: ratio}, masters, first, problem.weight, bits)
        start = _start(values)
        try:
            constants, fits = constants_at_base(
                canonical_system(form),
                values[start:],
                channel.target(ratio),
                generators_of(chain),
                ODDS,
                digits,
                bits,
            )
        except BoundaryError as error:
            failure = error
            continue
        fitted = tuple(
            Fitted(row, first + start + k, fit) for k, line in enumerate(fits) for row, fit in enumerate(line)
        )
        return replace(Boundary(first + start, constants, (), (), problem.corner), fitted=fitted)
    assert failure is not None
    raise failure


def _point(chain: Chain, form: EpsilonForm, channel: Channel, ratio: Fraction) -> dict[str, Fraction]:
    """The invariants at a ratio of the region, the unit of modulus one."""
    family = chain.definition
    values = chain.coordinates().values
    side = 1 if channel.unit == 0 else -1
    sizes = {i.name: i.dimension for i in family.invariants}
    assert family.unit is not None
    return {
        name: value.substitute({form.variables[0]: ratio}).to_fraction()
        * side ** (sizes[name] // sizes[family.unit])
        for name, value in values.items()
    }


def _at_unit(
    chain: Chain, channel: Channel, masters: Sequence[Mapping[int, Ball]], bits: int
) -> list[dict[int, Ball]]:
    """The masters over ``y_u^(A + B eps)``, where y_u is 1 or -1 with the phase of the region."""
    found = []
    for powers, master in zip(chain.masters().masters, masters, strict=True):
        if not master:
            found.append(dict(master))
            continue
        constant, slope = unit_exponent(chain.definition, powers)
        lowest, highest = min(master), max(master)
        count = highest - lowest + 1
        factors = unit_factors(Target(Fraction(1), channel.unit), (-constant, -slope), count, bits)
        with precision(bits):
            total = {lowest + k: flint.acb(0) for k in range(count)}
            for power, value in master.items():
                for k in range(highest - power + 1):
                    total[power + k] += value * factors[k]
        found.append(total)
    return found


def _start(values: Sequence[Sequence[Ball]]) -> int:
    """The place of the first order at which a function does not vanish."""
    for place, vector in enumerate(values):
        if not all(value.contains(0) for value in vector):
            return place
    return 0
