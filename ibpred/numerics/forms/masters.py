"""From canonical functions to master integrals and to any integral of the family.

Inside, the unit is set to one: ``I = y_u^([I]/dim u) sum_j r_j(eps) f_j(eps)`` with ``y_u = e_u u``, [I] the
mass dimension, and r_j in Q(eps) at a rational point: the row of the transformation for a master, a
combination of rows for any other integral.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction

import flint

from ibpred.balls.context import Ball, complex_ball, precision
from ibpred.epsform.form import EpsilonForm
from ibpred.errors import BoundaryError, InputError, PointError
from ibpred.exact.rational import Rational
from ibpred.family.definition import Powers
from ibpred.iterated.constants.series import eps_valuation, laurent
from ibpred.numerics.forms.canonical import Orders
from ibpred.numerics.forms.path import Target
from ibpred.numerics.forms.power_series import EPSILON, exponential_series, truncated_product


@dataclass(frozen=True)
class Row:
    """An integral as ``y_u^(A + B eps) sum_j entries[j] f_j``, f_j divided by its root where it has one.

    Attributes
    ----------
    powers
        The integral.
    exponent
        (A, B): the mass dimension over that of the unit.
    entries
        Elements of Q(eps), one for each canonical function.
    """

    powers: Powers
    exponent: tuple[Fraction, Fraction]
    entries: tuple[Rational, ...]


def master_rows(
    form: EpsilonForm,
    ratios: Mapping[str, Fraction],
    masters: Sequence[Powers],
    exponents: Sequence[tuple[Fraction, Fraction]],
) -> tuple[Row, ...]:
    """The masters at rational values of the ratios.

    Parameters
    ----------
    form
        The epsilon-form.
    ratios
        Values, negative on the negative axis whatever the side.
    masters, exponents
        Powers of the masters, and their mass dimensions over that of the unit as (A, B) of A + B eps.

    Raises
    ------
    PointError
        If the transformation has a pole there.
    """
    rows = []
    for powers, exponent, line in zip(masters, exponents, form.transformation, strict=True):
        entries = tuple(_at(entry, ratios) for entry in line)
        rows.append(Row(powers, exponent, entries))
    return tuple(rows)


def _at(entry: Rational, ratios: Mapping[str, Fraction]) -> Rational:
    images = {name: EPSILON.constant(value) for name, value in ratios.items()}
    try:
        return entry.substitute({"eps": EPSILON.variable("eps"), **images})
    except ZeroDivisionError:
        place = ", ".join(f"{name} = {value}" for name, value in ratios.items())
        raise PointError(
            f"the masters' basis is singular at {place}: {entry.denominator} vanishes there; choose another "
            "point"
        ) from None


def integral_row(
    powers: Powers,
    exponent: tuple[Fraction, Fraction],
    coefficients: Mapping[int, Rational],
    masters: Sequence[Row],
    dimension: int,
    values: Mapping[str, Fraction],
    unit: Fraction,
) -> Row:
    """An integral from its reduction.

    Parameters
    ----------
    powers, exponent
        The integral, and its mass dimension over that of the unit.
    coefficients
        Index of the master -> coefficient in Q(d, invariants).
    masters
        The rows of the masters at this point.
    dimension
        d0 in d = d0 - 2 eps.
    values
        The invariants at the point.
    unit
        ``y_u`` as a signed number.

    Raises
    ------
    PointError
        If a coefficient has a pole at the point.
    """
    eps = EPSILON.variable("eps")
    images: dict[str, Rational] = {name: EPSILON.constant(value) for name, value in values.items()}
    images["d"] = EPSILON.constant(dimension) - eps * 2
    size = len(masters[0].entries) if masters else 0
    entries = [EPSILON.zero] * size
    for index, coefficient in coefficients.items():
        master = masters[index]
        shift = master.exponent[0] - exponent[0]
        if shift.denominator != 1 or master.exponent[1] != exponent[1]:
            raise InputError(
                f"the mass dimensions of {powers} and of the master {master.powers} differ by no power of "
                "the unit"
            )
        try:
            factor = coefficient.substitute(images) * unit ** int(shift)
        except ZeroDivisionError:
            raise PointError(
                f"the reduction of {powers} is singular at this point: {coefficient.denominator} vanishes; "
                "choose another point"
            ) from None
        if factor:
            entries = [a + factor * b if b else a for a, b in zip(entries, master.entries, strict=True)]
    return Row(powers, exponent, tuple(entries))


def by_root(row: Row, tags: Sequence[tuple[int, ...]]) -> tuple[Row, ...]:
    """The parts of an integral with different roots; the whole where no tags are given."""
    if not any(tags):
        return (row,)
    parts = []
    for tag in dict.fromkeys(tags):
        entries = tuple(
            entry if tag == own else EPSILON.zero for entry, own in zip(row.entries, tags, strict=True)
        )
        parts.append(replace(row, entries=entries))
    return tuple(parts)


def needed_order(rows: Sequence[Row], order: int) -> int | None:
    """The highest power of eps of the canonical functions that the rows need through ``eps^order``.

    None where all rows are zero, so that nothing is needed.
    """
    return max((order - eps_valuation(entry) for row in rows for entry in row.entries if entry), default=None)


def lowest_order(row: Row, start: int) -> int | None:
    """The lowest power of eps that can occur where the functions begin at ``eps^start``; None for zero."""
    return min((start + eps_valuation(entry) for entry in row.entries if entry), default=None)


def assemble(row: Row, orders: Orders, start: int, unit: Target, order: int, bits: int) -> dict[int, Ball]:
    """Laurent coefficients of an integral through ``eps^order``.

    Parameters
    ----------
    row
        The integral.
    orders, start
        The canonical functions from ``eps^start`` on.
    unit
        y_u.
    order
        Highest power wanted.
    bits
        Working precision.

    Returns
    -------
    Power -> ball, from the lowest power that can occur on; exact zeros are included.

    Raises
    ------
    BoundaryError
        If the canonical functions do not go far enough (see `needed_order`).
    """
    lowest = lowest_order(row, start)
    if lowest is None or lowest > order:
        return {}
    needed = needed_order([row], order)
    if needed is not None and needed >= start + len(orders):
        raise BoundaryError(
            f"{row.powers} needs the canonical functions through eps^{needed}, they are known through "
            f"eps^{start + len(orders) - 1}: solve to a higher weight"
        )
    count = order - lowest + 1
    with precision(bits):
        sums = [complex_ball(0, 0, bits)] * count
        for j, entry in enumerate(row.entries):
            if not entry:
                continue
            series = laurent(entry, order - start)
            for i, factor in enumerate(series.coefficients):
                if not factor:
                    continue
                ball = complex_ball(factor.to_fraction(), 0, bits)
                for k in range(len(orders)):
                    at = series.start + i + start + k - lowest
                    if at >= count:
                        break
                    sums[at] = sums[at] + ball * orders[k][j]
    factors = unit_factors(unit, row.exponent, count, bits)
    product = truncated_product(sums, factors, count, bits)
    return {lowest + k: value for k, value in enumerate(product)}


def unit_factors(unit: Target, exponent: tuple[Fraction, Fraction], count: int, bits: int) -> list[Ball]:
    """The first coefficients in eps of ``y_u^(A + B eps)``."""
    with precision(bits):
        logarithm = _unit_logarithm(unit, bits)
        phase = _unit_power(unit, exponent[0], logarithm, bits)
        slope = logarithm * complex_ball(exponent[1], 0, bits)
    factors = exponential_series(slope, count, bits)
    with precision(bits):
        return [phase * factor for factor in factors]


def _unit_logarithm(unit: Target, bits: int) -> Ball:
    with precision(bits):
        return flint.acb(complex_ball(unit.modulus, 0, bits).log().real, unit.half_turns * flint.arb.pi())


def _unit_power(unit: Target, exponent: Fraction, logarithm: Ball, bits: int) -> Ball:
    """``y_u^exponent``; free of rounding in the phase for an integer exponent."""
    if exponent.denominator == 1:
        return complex_ball(unit.value ** int(exponent), 0, bits)
    with precision(bits):
        return (logarithm * complex_ball(exponent, 0, bits)).exp()
