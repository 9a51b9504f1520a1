"""Laurent coefficients of the masters near a point, singular or not: powers and logarithms of the distance.

On ``v = place + h direction``, h > 0, the system order by order in eps (`ibpred.numerics.laurent.expanded`)
has local solutions ``sum h^m log(h)^j u_mj`` with rational m (half-integers at thresholds with square
roots, for instance). The values at one distance inside the disc of convergence say which of them the
masters are.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import factorial, floor

import flint

from ibpred.balls.context import Ball, complex_ball, precision
from ibpred.errors import PrecisionError
from ibpred.numerics.frobenius.formal import FormalClass, SingularPoint
from ibpred.numerics.frobenius.layered_point import layered_classes, layered_point
from ibpred.numerics.frobenius.series import Local, frobenius_coefficients, frobenius_values
from ibpred.numerics.frobenius.tracks import BallMatrix, all_positions
from ibpred.numerics.laurent.expanded import ExpandedSystem, layers_on_line
from ibpred.numerics.laurent.laurent_line import Laurent

Terms = Mapping[tuple[Fraction, int], Ball]
"""(power of h, power of log h) -> coefficient."""

_CLOSENESS = 4  # the nearest other singular point over the distance where values are matched


@dataclass(frozen=True)
class LocalSystem:
    """The system around a point.

    Attributes
    ----------
    point
        All orders together, in h.
    classes
        The solutions that start at the lowest order.
    shifts
        r_i: the system is that of ``eps^(r_i) I_i``.
    """

    point: SingularPoint
    classes: tuple[FormalClass, ...]
    shifts: tuple[int, ...]

    @property
    def depth(self) -> int:
        return self.point.layers


@dataclass(frozen=True)
class LocalConstants:
    """Which of the local solutions the masters are.

    Attributes
    ----------
    lowest
        The power of eps of the first order.
    orders
        For each order and class one column over the solutions of the class.
    """

    lowest: int
    orders: tuple[tuple[BallMatrix, ...], ...]


def local_system(
    expanded: ExpandedSystem, place: Mapping[str, Fraction], direction: Mapping[str, Fraction], name: str
) -> LocalSystem:
    """The system on ``place + h direction``, to as many orders as `expanded` has.

    Parameters
    ----------
    name
        Of the point, for messages.

    Raises
    ------
    PointError
        If the whole line is singular.
    UnfinishedError
        If the pole cannot be made simple, or exponents are not rational.
    """
    end = {key: value + direction.get(key, Fraction(0)) for key, value in place.items()}
    point = layered_point(layers_on_line(expanded, place, end), name)
    return LocalSystem(point, layered_classes(point, 1), expanded.shifts)


def matching_distance(system: LocalSystem) -> Fraction:
    """A distance well inside the disc of convergence."""
    positions = [p for p in all_positions(system.point.fractions, 64) if not p.contains(0)]
    nearest = min((Fraction(float(p.abs_lower())) for p in positions), default=Fraction(1))
    return (nearest / _CLOSENESS).limit_denominator(1000) or nearest / _CLOSENESS


def matched(
    system: LocalSystem, h: Fraction, values: Sequence[Laurent], lowest: int, bits: int
) -> LocalConstants:
    """The constants from the masters at a distance.

    Parameters
    ----------
    system
        The system; its depth says how many orders are treated.
    h
        The distance, positive (see `matching_distance`).
    values
        Laurent coefficients of every master there; what is missing vanishes.
    lowest
        The lowest power of any ``eps^(r_i) I_i``.
    bits
        Working precision.

    Raises
    ------
    PrecisionError
        If the precision is too low.
    """
    size, depth = len(system.shifts), system.depth
    with precision(bits):
        x = complex_ball(h, 0, bits)
        log = x.log()
    tables = [
        frobenius_values(Local(system.point, part), x, log, None, bits).table() for part in system.classes
    ]
    with precision(bits):
        rows = [[value for table in tables for value in table[i]] for i in range(size * depth)]
        blocks = [flint.acb_mat(rows[k * size : (k + 1) * size]) for k in range(depth)]
        try:
            inverse = blocks[0].inv()
        except ZeroDivisionError:
            raise PrecisionError(
                f"the local solutions cannot be told apart at {bits} bits; raise the precision"
            ) from None
        columns: list[BallMatrix] = []
        for k in range(depth):
            right = flint.acb_mat(
                [[values[i].get(lowest + k - shift, flint.acb(0))] for i, shift in enumerate(system.shifts)]
            )
            for j in range(1, k + 1):
                right = right - blocks[j] * columns[k - j]
            columns.append(inverse * right)
    return LocalConstants(lowest, tuple(_by_class(system.classes, column) for column in columns))


def _by_class(classes: Sequence[FormalClass], column: BallMatrix) -> tuple[BallMatrix, ...]:
    entries = column.table()
    found = []
    for part in classes:
        found.append(flint.acb_mat(entries[: part.solutions]))
        entries = entries[part.solutions :]
    return tuple(found)


def master_terms(
    system: LocalSystem, constants: LocalConstants, highest: int, bits: int
) -> tuple[dict[int, dict[tuple[Fraction, int], Ball]], ...]:
    """The expansions of the masters through ``h^highest``.

    Returns
    -------
    For every master: power of eps -> (power of h, power of log h) -> coefficient. All powers of eps that the
    system holds are there, the last ones not to be used where shifts are positive.
    """
    size = len(system.shifts)
    gauge = system.point.gauge[:size]
    found: tuple[dict[int, dict[tuple[Fraction, int], Ball]], ...] = tuple({} for _ in range(size))
    for number, part in enumerate(system.classes):
        count = floor(highest - part.exponent - min(gauge)) + 1
        if count <= 0:
            continue
        coefficients = frobenius_coefficients(Local(system.point, part), count, None, bits)
        with precision(bits):
            for n, levels in enumerate(coefficients):
                for log, matrix in enumerate(levels):
                    _add(found, system, constants, number, part.exponent + n, log, matrix)
    for target in found:
        for terms in target.values():
            for key in [key for key in terms if key[0] > highest]:
                del terms[key]
    return found


def _add(
    found: Sequence[dict[int, dict[tuple[Fraction, int], Ball]]],
    system: LocalSystem,
    constants: LocalConstants,
    number: int,
    power: Fraction,
    log: int,
    matrix: BallMatrix,
) -> None:
    size, depth = len(system.shifts), system.depth
    table = matrix.table()
    blocks = [flint.acb_mat(table[k * size : (k + 1) * size]) for k in range(depth)]
    nonzero = [any(not value.is_zero() for value in block.entries()) for block in blocks]
    for k in range(depth):
        total = None
        for j in range(k + 1):
            if nonzero[j]:
                part = blocks[j] * constants.orders[k - j][number]
                total = part if total is None else total + part
        if total is None:
            continue
        for i, shift in enumerate(system.shifts):
            value = total[i, 0]
            if value.is_zero():
                continue
            key = (power + system.point.gauge[i], log)
            terms = found[i].setdefault(constants.lowest + k - shift, {})
            terms[key] = terms.get(key, flint.acb(0)) + value / factorial(log)


def order_depth(shifts: Sequence[int], lowest: int, highest: int) -> int:
    """How many orders lead from ``eps^lowest`` of the rescaled masters to ``eps^highest`` of all of them."""
    return max(highest + max(shifts) - lowest + 1, 1)


def values_at(
    system: LocalSystem, constants: LocalConstants, h: Fraction, bits: int
) -> tuple[dict[int, Ball], ...]:
    """The masters at a distance from their local constants; the other way round than `matched`.

    Returns
    -------
    For every master power of eps -> coefficient; number i ends r_i orders below the system's last one.
    """
    size, depth = len(system.shifts), system.depth
    with precision(bits):
        x = complex_ball(h, 0, bits)
        log = x.log()
    orders = [flint.acb_mat(size, 1) for _ in range(depth)]
    for number, part in enumerate(system.classes):
        table = frobenius_values(Local(system.point, part), x, log, None, bits).table()
        with precision(bits):
            blocks = [flint.acb_mat(table[k * size : (k + 1) * size]) for k in range(depth)]
            for k in range(depth):
                for j in range(k + 1):
                    orders[k] = orders[k] + blocks[j] * constants.orders[k - j][number]
    return tuple(
        {constants.lowest + k - shift: orders[k][i, 0] for k in range(depth)}
        for i, shift in enumerate(system.shifts)
    )
