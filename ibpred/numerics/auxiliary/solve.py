"""All values of a plan at one numeric eps."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import flint

from ibpred.balls.context import Ball, complex_ball, precision, real_ball
from ibpred.boundary.behaviour.gamma import GammaForm
from ibpred.errors import BoundaryError, PointError
from ibpred.exact.rational import Rational
from ibpred.numerics.auxiliary.infinity import (
    AtInfinity,
    SeriesRow,
    at_infinity,
    expanded,
    flow_system,
    leading_power,
    lowest_order,
    series_row,
    solution,
)
from ibpred.numerics.auxiliary.plan import AuxiliaryPlan, Combination, Flow, Straightening
from ibpred.numerics.frobenius.continuation import carried
from ibpred.numerics.frobenius.formal import (
    FormalClass,
    SingularPoint,
    formal_class,
    resonance,
    singular_point,
)
from ibpred.numerics.frobenius.path import Path, Point, approximate, straight
from ibpred.numerics.frobenius.poles import PartialFractions, partial_fractions
from ibpred.numerics.frobenius.series import Local, frobenius_values
from ibpred.numerics.frobenius.system import RationalSystem, adjoint, fmpq, inverted
from ibpred.numerics.frobenius.tracks import BallMatrix, all_positions

_DIRECTIONS = ((0, -1), (3, -4), (-3, -4), (8, -15), (-8, -15), (4, -3), (-4, -3))
_INWARDS = 8  # ends of the path over the nearest singular points


def sampled(plan: AuxiliaryPlan, eps: Fraction, bits: int) -> tuple[Ball, ...]:
    """The wanted integrals at one eps.

    Parameters
    ----------
    plan
        The plan.
    eps
        A rational number, not zero and no special value.
    bits
        Working precision; the radii of the result say what it achieved.

    Raises
    ------
    PointError
        If eps is zero or a coefficient has a pole there.
    BoundaryError
        If regions and differential equation contradict each other, or the mass cannot be taken to zero.
    PrecisionError
        If the precision is too low for rigorous series.
    """
    if eps == 0:
        raise PointError(f"{plan.family}: values are computed at nonzero eps, where integrals are finite")
    values: list[tuple[Ball, ...]] = []
    for node in plan.nodes:
        if node.flow is not None:
            values.append(flow_values(node.flow, values, plan.loops, eps, bits))
        elif node.straightening is not None:
            values.append(straightened_values(node.straightening, values, eps, bits))
        else:
            values.append(tuple(combined(c, values, plan.dimension, eps, bits) for c in node.values))
    return tuple(combined(c, values, plan.dimension, eps, bits) for c in plan.values)


def combined(
    combination: Combination, values: Sequence[Sequence[Ball]], dimension: int, eps: Fraction, bits: int
) -> Ball:
    """The value of a combination."""
    with precision(bits):
        total = flint.acb(0)
        for part in combination:
            factor = complex_ball(_at(part.factor, dimension, eps), 0, bits)
            if part.form is not None:
                total = total + factor * gamma_value(part.form, eps, bits)
            else:
                total = total + factor * values[part.node][part.index]
        return total


def _at(factor: Rational, dimension: int, eps: Fraction) -> Fraction:
    try:
        return factor.substitute(dict.fromkeys(factor.ring.names, dimension - 2 * eps)).to_fraction()
    except ZeroDivisionError:
        raise PointError(f"a coefficient has a pole at eps = {eps}: {factor}") from None


def gamma_value(form: GammaForm, eps: Fraction, bits: int) -> Ball:
    """A closed form at a fixed eps; a negative scale s means s - i0."""
    with precision(bits):
        euler = flint.arb.const_euler() * flint.arb(fmpq(form.loops * eps))
        value = flint.acb(euler.exp() * real_ball(form.prefactor, bits))
        for a, b in form.numerator:
            value = value * flint.acb(flint.arb(fmpq(a + b * eps))).gamma()
        for a, b in form.denominator:
            value = value * flint.acb(flint.arb(fmpq(a + b * eps))).rgamma()
        for scale, (p, q) in form.scales:
            number = scale.to_fraction()
            logarithm = flint.acb(real_ball(abs(number), bits).log())
            if number < 0:
                logarithm = logarithm - flint.acb(0, flint.arb.pi())
            value = value * (logarithm * flint.arb(fmpq(p + q * eps))).exp()
        return value


def flow_values(
    flow: Flow, values: Sequence[Sequence[Ball]], loops: int, eps: Fraction, bits: int
) -> tuple[Ball, ...]:
    """The targets of a flow at one eps."""
    system = flow_system(flow, eps)
    fractions = partial_fractions(system)
    path = lower_path(fractions)
    start, end = path[0], path[-1]
    place = at_infinity(flow, eps, loops)
    vector = _from_infinity(flow, place, values, eps, complex_ball(*start, bits), bits)
    vector = carried(fractions, path, vector, bits)
    name = f"zero auxiliary mass of {flow.family} on the line {flow.line}"
    rows = [series_row(flow, row, eps, at_infinity=False) for row in flow.targets]
    return _at_zero(name, system, rows, vector, complex_ball(*end, bits), bits)


def straightened_values(
    node: Straightening, values: Sequence[Sequence[Ball]], eps: Fraction, bits: int
) -> tuple[Ball, ...]:
    """The targets of a straightening at one eps."""
    known = [combined(c, values, node.dimension, eps, bits) for c in node.known]
    with precision(bits):
        vector = flint.acb_mat([[value] for value in known])
    rows = [series_row(node, row, eps, at_infinity=True) for row in node.targets]
    flat = complex_ball(1 / node.start, 0, bits)
    name = f"straight lines of {node.family}"
    return _at_zero(name, inverted(flow_system(node, eps)), rows, vector, flat, bits)


def lower_path(fractions: PartialFractions) -> Path:
    """A path from large to small mass in the lower half plane, where integrals are analytic.

    The mass has the sign of the i0 of its line: F has a negative imaginary part all along.
    """
    poles = [p for p in approximate(all_positions(fractions, 64)) if abs(p) > 1e-12]
    largest = max((abs(p) for p in poles), default=1.0)
    least = min((abs(p) for p in poles), default=1.0)
    outer = Fraction(round(largest * _INWARDS * 64) + 1, 64)
    inner = Fraction(1, round(64 * _INWARDS / least) + 1) * 64
    found = []
    for x, y in _DIRECTIONS:
        size = Fraction(round((x * x + y * y) ** 0.5))
        ends: list[Point] = [(r * x / size, r * y / size) for r in (outer, inner)]
        path = straight([*poles, 0j], ends[0], ends[1])
        if path is not None:
            found.append(path)
    if not found:
        raise PointError("no way for the auxiliary mass to zero avoids the singular points")
    return min(found, key=len)


def _from_infinity(
    flow: Flow,
    place: AtInfinity,
    values: Sequence[Sequence[Ball]],
    eps: Fraction,
    eta: Ball,
    bits: int,
) -> BallMatrix:
    with precision(bits):
        z, log = 1 / eta, -eta.log()
        total = flint.acb_mat(len(flow.masters), 1)
    for part in place.classes:
        leading = [
            _leading(flow, index, part.loops, values, eps, bits) for index in range(len(flow.conditions))
        ]
        formal, column = solution(flow, part, leading, bits)
        if not column.nrows():
            continue
        contribution = frobenius_values(Local(place.point, formal), z, log, column, bits)
        with precision(bits):
            total = total + contribution
    return total


def _leading(
    flow: Flow, index: int, loops: int, values: Sequence[Sequence[Ball]], eps: Fraction, bits: int
) -> Ball:
    """The leading coefficient of a condition in one class."""
    terms = [term for term in flow.conditions[index].terms if term.loops == loops]
    total = flint.acb(0)
    if not terms:
        return total
    first = min(leading_power(flow, eps, loops, term.power) for term in terms)
    with precision(bits):
        for term in terms:
            if leading_power(flow, eps, loops, term.power) != first:
                continue
            hard = combined(term.hard, values, flow.dimension, eps, bits)
            soft = combined(term.soft, values, flow.dimension, eps, bits)
            value = hard * soft
            if term.jacobian != 1:
                size = real_ball(term.jacobian, bits).log() * flint.arb(fmpq(2 * eps - flow.dimension))
                value = value * size.exp()
            total = total + value
    return total


def _unit_row(column: int) -> SeriesRow:
    one = flint.fmpq_poly([1])
    return SeriesRow({column: 0}, {column: (one, one)})


def _at_zero(
    name: str,
    system: RationalSystem,
    rows: Sequence[SeriesRow],
    vector: BallMatrix,
    place: Ball,
    bits: int,
) -> tuple[Ball, ...]:
    """Read the class of integer exponents at zero off: the other regions vanish there or are dropped.

    The coefficients of that class are pairings with the integer-exponent solutions of the adjoint system,
    so that only these have to be summed up.
    """
    direct, dual = singular_point(system, name), singular_point(adjoint(system), name)
    if Fraction(0) not in direct.spectrum.classes():
        raise BoundaryError(f"at {name} no solution has an integer exponent")
    least = int(resonance(direct, Fraction(0))[0]) + min(direct.gauge)
    least_dual = int(resonance(dual, Fraction(0))[0]) + min(dual.gauge)
    order = max([-least_dual, *(-min(row.start.values()) for row in rows if row.start), 0])
    solutions = formal_class(direct, Fraction(0), max(1, order - least + 1))
    duals = formal_class(dual, Fraction(0), max(1, -least - least_dual + 1))
    pairing = _pairing(direct, solutions, dual, duals)
    readings = [_readings(direct, solutions, row) for row in rows]
    lines = [line for reading in readings for line in reading]
    if not lines:
        return (flint.acb(0),) * len(rows)
    # exact combinations of the dual solutions that give each coefficient wanted
    combination = (flint.fmpq_mat([line.values for line in lines]) * pairing.inv()).transpose()
    with precision(bits):
        log = place.log()
    sums = frobenius_values(Local(dual, duals.combined(combination)), place, log, None, bits)
    with precision(bits):
        products = list((sums.transpose() * vector).entries())
    found = []
    for reading in readings:
        own, products = products[: len(reading)], products[len(reading) :]
        found.append(_limit(name, reading, own))
    return tuple(found)


@dataclass(frozen=True)
class _Reading:
    """The coefficient of ``x^power log(x)^logs`` of a target, for each integer-exponent solution."""

    power: int
    logs: int
    values: list[Any]


def _pairing(left: SingularPoint, solutions: FormalClass, right: SingularPoint, duals: FormalClass) -> Any:
    """The constant matrix of the products of dual and direct solutions."""
    total = flint.fmpq_mat(duals.solutions, solutions.solutions)
    for component in range(left.size):
        ours = _component(left, solutions, component)
        theirs = _component(right, duals, component)
        for power, values in ours.items():
            others = theirs.get(-power)
            if others is not None:
                total = total + flint.fmpq_mat([[a] for a in others]) * flint.fmpq_mat([values])
    return total


def _component(point: SingularPoint, formal: FormalClass, component: int) -> dict[int, list[Any]]:
    """Powers of x without logarithm in one component, for every solution."""
    base = int(formal.exponent)
    row = _unit_row(component)
    order = lowest_order(point, row) + len(formal.terms) - 1
    return {base + s: values for (s, k), values in expanded(point, formal, row, order).items() if k == 0}


def _readings(point: SingularPoint, formal: FormalClass, row: SeriesRow) -> list[_Reading]:
    """The coefficients of a target that matter: that of x^0, and those that must vanish."""
    if not row.start:
        return []
    order = -int(formal.exponent)
    return [
        _Reading(s - order, k, values)
        for (s, k), values in sorted(expanded(point, formal, row, order).items())
        if any(values)
    ]


def _limit(name: str, readings: Sequence[_Reading], products: Sequence[Ball]) -> Ball:
    """The coefficient of x^0; lower powers and logarithms must drop out."""
    value = flint.acb(0)
    for reading, product in zip(readings, products, strict=True):
        if reading.power == 0 and reading.logs == 0:
            value = product
        elif not product.contains(0):
            raise BoundaryError(
                f"at {name} the solutions with integer exponents contain x^{reading.power} "
                f"log(x)^{reading.logs}: there is no limit"
            )
    return value
