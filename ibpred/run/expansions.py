"""Expansions of integrals at singular points, from a solved epsilon-form."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING

from ibpred.balls.accuracy import bits_for, until_accurate
from ibpred.balls.context import Ball, precision
from ibpred.balls.decimal import DecimalBall, decimal_ball
from ibpred.epsform.form import EpsilonForm
from ibpred.errors import ObstructionError, PointError
from ibpred.exact.rational import Rational
from ibpred.family.definition import Powers
from ibpred.numerics.approach import (
    DISTANCE,
    check_separated,
    integral_terms,
    local_functions,
    lowest_power,
    nearest_other,
)
from ibpred.numerics.masters import Row, needed_order, unit_factors
from ibpred.numerics.several import line_system
from ibpred.reduction.wanted import check_powers
from ibpred.run.form_values import bits_ceiling, form_functions, place_of, unit_exponent

if TYPE_CHECKING:
    from ibpred.run.chain import Chain

Point = Mapping[str, Fraction]
LocalTerms = Mapping[tuple[int, int], Ball]

_SPARE_BITS = 96


@dataclass(frozen=True)
class Approach:
    """``name = place + side * h`` with h -> 0+; `side` is 1 or -1."""

    name: str
    place: Fraction
    side: int


@dataclass(frozen=True)
class Expansion:
    """An integral near a singular point.

    Attributes
    ----------
    powers
        The integral.
    epsilon
        Power of eps -> (power of h, power of log h) -> coefficient; rigorous balls. Terms whose ball holds
        zero are left out.
    """

    powers: Powers
    epsilon: Mapping[int, Mapping[tuple[int, int], DecimalBall]]


def expand(
    chain: Chain,
    fixed: Point,
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

    Raises
    ------
    PointError
        If the point is incomplete, the unit itself is to vary, or other singular points coincide.
    UnfinishedError
        If the family has no solved epsilon-form.
    """
    family = chain.definition
    for powers in wanted:
        check_powers(family, powers)
    names = [invariant.name for invariant in family.invariants]
    if approach.name == family.unit or approach.name not in names:
        others = ", ".join(name for name in names if name != family.unit) or "none"
        raise PointError(f"{approach.name!r} cannot be approached; invariants that can: {others}")
    if approach.name in fixed:
        raise PointError(f"{approach.name} is given twice, by --at and by --approach")
    form = chain.solved_form()
    if any(form.tags):
        raise ObstructionError("expansions of canonical functions with square roots are not supported")
    start = _ratios(chain, form, fixed, approach, Fraction(0))
    end = _ratios(chain, form, fixed, approach, Fraction(1))
    system = line_system(form, start, end)
    h = (nearest_other(system) / 4).limit_denominator(1000) or nearest_other(system) / 4
    place = place_of(chain, {**fixed, approach.name: approach.place + approach.side * h})
    rows = _rows(chain, form, start, end, fixed, approach, wanted)
    check_separated([entry for row in rows for entry in row.entries])
    boundary = chain.boundary(max(needed_order(rows, order) or 0, 2 * len(family.loops)))
    functions = form_functions(form, boundary)
    targets = dict(zip(form.variables, place.ratios.values(), strict=True))
    count = max((needed_order(rows, order) or 0) - boundary.start + 1, 1)
    terms = highest - lowest_power([entry for row in rows for entry in row.entries]) + 1
    chain.progress.stage("expansion")

    def compute(bits: int) -> list[dict[int, dict[tuple[int, int], Ball]]]:
        constants = tuple(tuple(c.ball(bits) for c in v) for v in boundary.constants[:count])
        values = functions.at(constants, [targets], bits)[0]
        local = local_functions(system, values, h, terms, bits)
        found = []
        for row in rows:
            plain = integral_terms(row.entries, local, boundary.start, order, highest, bits)
            found.append(
                _with_unit(plain, unit_factors(place.unit, row.exponent, 2 * count, bits), order, bits)
            )
        return found

    results = until_accurate(
        compute,
        lambda found: [ball for row in found for terms in row.values() for ball in terms.values()],
        digits,
        bits_for(digits) + _SPARE_BITS,
        bits_ceiling(digits),
    )
    return tuple(
        Expansion(
            row.powers,
            {
                power: {
                    key: decimal_ball(b, digits + 2) for key, b in sorted(terms.items()) if not b.contains(0)
                }
                for power, terms in sorted(result.items())
            },
        )
        for row, result in zip(rows, results, strict=True)
    )


def _ratios(
    chain: Chain, form: EpsilonForm, fixed: Point, approach: Approach, h: Fraction
) -> dict[str, Fraction]:
    """The ratios as signed numbers at a distance."""
    family = chain.definition
    signs = chain.euclidean_signs()
    point = {**fixed, approach.name: approach.place + approach.side * h}
    missing = [invariant.name for invariant in family.invariants if invariant.name not in point]
    if missing:
        raise PointError(f"the point lacks a value for {', '.join(missing)}; give every invariant")
    assert family.unit is not None
    unit = signs[family.unit] * point[family.unit]
    if unit == 0:
        raise PointError(f"the point is singular: {family.unit} = 0; choose another value")
    sizes = {invariant.name: invariant.dimension for invariant in family.invariants}
    others = [invariant.name for invariant in family.invariants if invariant.name != family.unit]
    return {
        ratio: signs[name] * point[name] / unit ** (sizes[name] // sizes[family.unit])
        for ratio, name in zip(form.variables, others, strict=True)
    }


def _rows(
    chain: Chain,
    form: EpsilonForm,
    start: Mapping[str, Fraction],
    end: Mapping[str, Fraction],
    fixed: Point,
    approach: Approach,
    wanted: Sequence[Powers],
) -> tuple[Row, ...]:
    family = chain.definition
    h, eps = DISTANCE.variable("h"), DISTANCE.variable("eps")
    images = {name: h * (end[name] - start[name]) + start[name] for name in start}
    masters = chain.masters().masters
    rows = [
        Row(
            powers,
            unit_exponent(family, powers),
            tuple(entry.substitute({"eps": eps, **images}) for entry in line),
        )
        for powers, line in zip(masters, form.transformation, strict=True)
    ]
    if not wanted:
        return tuple(rows)
    assert family.unit is not None
    table = chain.reduction(tuple(dict.fromkeys(wanted)))
    unit = chain.euclidean_signs()[family.unit] * fixed[family.unit]
    values = {name: DISTANCE.constant(value) for name, value in fixed.items()}
    values |= {approach.name: h * approach.side + approach.place, "d": eps * -2 + family.dimension}
    found = []
    for powers in wanted:
        exponent = unit_exponent(family, powers)
        entries: list[Rational] = [DISTANCE.zero] * len(masters)
        for index, coefficient in dict(table.reductions[powers]).items():
            shift = rows[index].exponent[0] - exponent[0]
            factor = coefficient.substitute(values) * unit ** int(shift)
            entries = [a + factor * b for a, b in zip(entries, rows[index].entries, strict=True)]
        found.append(Row(tuple(powers), exponent, tuple(entries)))
    return tuple(found)


def _with_unit(
    plain: Mapping[int, LocalTerms], factors: Sequence[Ball], order: int, bits: int
) -> dict[int, dict[tuple[int, int], Ball]]:
    found: dict[int, dict[tuple[int, int], Ball]] = {}
    with precision(bits):
        for power, terms in plain.items():
            for k, factor in enumerate(factors):
                if power + k > order:
                    break
                if factor.is_zero():
                    continue
                target = found.setdefault(power + k, {})
                for key, value in terms.items():
                    target[key] = target[key] + factor * value if key in target else factor * value
    return found
