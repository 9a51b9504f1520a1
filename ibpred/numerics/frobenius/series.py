"""Values of local solutions: Taylor steps and Frobenius series with logarithms, balls with their tails."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import flint
import numpy as np

from ibpred.balls.context import Ball, RealBall, precision
from ibpred.errors import PrecisionError
from ibpred.numerics.frobenius.formal import FormalClass, SingularPoint
from ibpred.numerics.frobenius.majorant import (
    Majorant,
    Tail,
    majorant,
    operator_norm,
    widened_matrix,
)
from ibpred.numerics.frobenius.poles import PartialFractions
from ibpred.numerics.frobenius.spectrum import ExactMatrix
from ibpred.numerics.frobenius.system import fmpq
from ibpred.numerics.frobenius.tracks import (
    BallMatrix,
    RunningSums,
    Tracks,
    all_positions,
    tracks_around,
)

_GUARD_BITS = 24
_PATIENCE = 4  # how many times the expected number of terms a series may take
_CHECK = 8  # terms between two looks at the remainder


def taylor_step(
    fractions: PartialFractions, centre: Ball, target: Ball, values: BallMatrix, bits: int
) -> BallMatrix:
    """Carry solutions from an ordinary point to a point in its disc.

    Parameters
    ----------
    fractions
        The system.
    centre, target
        Two points; the second one well inside the disc of convergence around the first.
    values
        Solutions at the centre, one a column.
    bits
        Working precision.

    Returns
    -------
    The solutions at the target, with rigorous radii.

    Raises
    ------
    PrecisionError
        If the series cannot be bounded: target too far, or precision too low.
    """
    with precision(bits):
        step = target - centre
        scale = _scale(fractions, centre, step, bits)
        tracks = tracks_around(fractions, centre, scale, bits)
        t = step / scale
        size = flint.arb(t.abs_upper())
    terms = _expected_terms(size, bits)
    bounds = majorant(tracks, terms)
    tail = Tail(bounds, 0.0)
    with precision(bits):
        current, total, power = values, values, flint.acb(1)
        history = [current]
        sums = RunningSums(tracks, values.ncols())
        tail.add(bounds.norm(current))
        n = 0
        while True:
            sums.feed(current)
            right = sums.drained()
            for matrix, before in zip(tracks.polynomial, reversed(history), strict=False):
                right = right + matrix * before
            n += 1
            current = right * (flint.arb(1) / n)
            power = power * t
            total = total + current * power
            if tracks.polynomial:
                history = [*history, current][-len(tracks.polynomial) :]
            tail.add(bounds.norm(current))
            if n >= terms and n % _CHECK == 0:
                rest = tail.remainder(n, size)
                if rest is not None and _is_negligible(rest, total, bounds, bits):
                    return widened_matrix(total, rest, bounds.weights, bits)
                _give_up(n, terms, size, bits)


def _scale(fractions: PartialFractions, centre: Ball, step: Ball, bits: int) -> RealBall:
    """The distance to the nearest pole, or the step where there is none."""
    nearest = None
    for position in all_positions(fractions, bits):
        distance = (position - centre).abs_lower()
        nearest = distance if nearest is None else nearest.min(distance)
    if nearest is None:
        return flint.arb(2 * step.abs_upper())
    if not nearest > 0:
        raise PrecisionError("a series was asked for at a singular point; it needs an exact local analysis")
    return flint.arb(nearest)


def _expected_terms(size: RealBall, bits: int) -> int:
    ratio = float(size.upper())
    if not ratio < 0.97:
        raise PrecisionError(
            f"a local series was asked for at {ratio:.3f} of its radius of convergence; take smaller steps"
        )
    return max(4, int((bits + _GUARD_BITS) / -np.log2(max(ratio, 1e-6)))) + 4


def _is_negligible(rest: RealBall, total: BallMatrix, bounds: Majorant, bits: int) -> bool:
    """Whether the remainder adds nothing to the radii, component by component."""
    with precision(64):
        small = flint.arb(2) ** (-bits)
        for weight, row in zip(bounds.weights, total.table(), strict=True):
            allowed = flint.arb(0)
            for value in row:
                allowed = allowed.max(value.abs_upper() * small).max(value.rad())
            if allowed > 0 and not rest * float(weight) <= allowed:
                return False
    return True


def _give_up(n: int, terms: int, size: RealBall, bits: int) -> None:
    if n > _PATIENCE * terms + 64:
        raise PrecisionError(
            f"the remainder of a local series at {size.str(3, radius=False)} of its radius cannot be "
            f"bounded with {n} terms at {bits} bits; raise the working precision or take smaller steps"
        )


@dataclass(frozen=True)
class Local:
    """The solutions of one class near a singular point, ready for values.

    Attributes
    ----------
    point
        The point.
    formal
        The class to a finite order past its last resonance.
    """

    point: SingularPoint
    formal: FormalClass


def frobenius_values(
    local: Local, x: Ball, log: Ball, combination: BallMatrix | None, bits: int
) -> BallMatrix:
    """Values of Frobenius solutions at a point.

    Parameters
    ----------
    local
        The class.
    x, log
        The local variable and its logarithm on the branch meant.
    combination
        Columns of coefficients over the solutions of the class; all of them where not given.
    bits
        Working precision.

    Returns
    -------
    The values, one solution or combination a column, with rigorous radii.

    Raises
    ------
    PrecisionError
        If the series cannot be bounded: point too far, or precision too low.
    """
    point = local.point
    with precision(bits):
        scale = _scale_at_zero(point, x, bits)
        tracks = tracks_around(point.fractions, flint.acb(0), scale, bits)
        t = x / scale
        size = flint.arb(t.abs_upper())
        run = _Coefficients(local, tracks, combination)
    terms = max(_expected_terms(size, bits), len(run.start))
    bounds = majorant(tracks, terms, run.residue)
    tail = Tail(bounds, operator_norm(run.residue, bounds) + 1)
    with precision(bits):
        total, power = run.current, flint.acb(1)
        tail.add(bounds.norm(run.current) * run.depth**0.5)
        while True:
            run.advance()
            power = power * t
            total = total + run.current * power
            tail.add(bounds.norm(run.current) * run.depth**0.5)
            n = run.number
            if n >= terms and n % _CHECK == 0:
                rest = tail.remainder(n, size)
                if rest is not None and _is_negligible(rest, total, bounds, bits):
                    return _assembled(local, total, rest, bounds, x, log, run.depth, run.width, bits)
                _give_up(n, terms, size, bits)


def frobenius_coefficients(
    local: Local, count: int, combination: BallMatrix | None, bits: int
) -> list[list[BallMatrix]]:
    """Coefficients of Frobenius solutions.

    Parameters
    ----------
    local, combination, bits
        As in `frobenius_values`.
    count
        How many powers of the local variable.

    Returns
    -------
    list
        ``found[n][k]`` is in front of ``x^(exponent + n + gauge[i]) log(x)^k/k!`` in function i, one solution
        or combination a column.
    """
    with precision(bits):
        scale = _scale_at_zero(local.point, flint.acb(1), bits)
        tracks = tracks_around(local.point.fractions, flint.acb(0), scale, bits)
        run = _Coefficients(local, tracks, combination)
        found = []
        for n in range(count):
            if n:
                run.advance()
            unscaled = run.current / scale**n
            found.append([_columns(unscaled, k * run.width, run.width) for k in range(run.depth)])
        return found


class _Coefficients:
    """The coefficients one after the other, the levels of the logarithm side by side.

    Attributes
    ----------
    start
        Those known exactly, past the last resonance.
    current, number
        The latest one, and its number.
    residue
        The residue less the exponent.
    depth, width
        Number of levels, and of columns in each.
    """

    def __init__(self, local: Local, tracks: Tracks, combination: BallMatrix | None) -> None:
        self._point, formal = local.point, local.formal
        basis = self._point.spectrum.basis
        self.depth = max(len(levels) for levels in formal.terms)
        self.residue = flint.acb_mat(_lowered(self._point.residue, formal.exponent))
        self.start = [
            _as_balls([basis * level for level in levels], self.depth, tracks.scale**n, combination)
            for n, levels in enumerate(formal.terms)
        ]
        self.current, self.number = self.start[0], 0
        self.width = self.current.ncols() // self.depth
        self._polynomial = tracks.polynomial
        self._history = [self.current]
        self._sums = RunningSums(tracks, self.current.ncols())

    def advance(self) -> None:
        """Go to the next coefficient, at the precision that is set."""
        self._sums.feed(self.current)
        self.number += 1
        if self.number < len(self.start):
            self.current = self.start[self.number]
        else:
            right = self._sums.drained()
            for matrix, before in zip(self._polynomial, reversed(self._history), strict=False):
                right = right + matrix * before
            resolvent = _resolvent(self.residue, self.number, self._point.layers)
            self.current = _by_levels(resolvent, right, self.depth, self.width)
        if self._polynomial:
            self._history = [*self._history, self.current][-len(self._polynomial) :]


def _resolvent(residue: BallMatrix, n: int, layers: int) -> BallMatrix:
    """``(n - residue)^-1``; of equal blocks below the diagonal the first column says all."""
    size = residue.nrows() // layers
    table = residue.table()
    identity = flint.acb_mat(flint.fmpq_mat(_identity(size)))
    parts = [flint.acb_mat([row[:size] for row in table[k * size : (k + 1) * size]]) for k in range(layers)]
    first = (identity * n - parts[0]).inv()
    found = [first]
    for k in range(1, layers):
        total = parts[1] * found[k - 1]
        for j in range(2, k + 1):
            total = total + parts[j] * found[k - j]
        found.append(first * total)
    if layers == 1:
        return first
    tables = [part.table() for part in found]
    zero = [flint.acb(0)] * size
    return flint.acb_mat(
        [
            [value for j in range(k + 1) for value in tables[k - j][i]] + zero * (layers - k - 1)
            for k in range(layers)
            for i in range(size)
        ]
    )


def _lowered(residue: ExactMatrix, base: Fraction) -> ExactMatrix:
    matrix = flint.fmpq_mat(residue)
    for i in range(matrix.nrows()):
        matrix[i, i] = matrix[i, i] - fmpq(base)
    return matrix


def _identity(size: int) -> list[list[int]]:
    return [[int(i == j) for j in range(size)] for i in range(size)]


def _scale_at_zero(point: SingularPoint, x: Ball, bits: int) -> RealBall:
    nearest = None
    for pole in point.fractions.poles:
        if pole.position() == 0:
            continue
        for position in all_positions(PartialFractions(point.size, (pole,), ()), bits):
            distance = position.abs_lower()
            nearest = distance if nearest is None else nearest.min(distance)
    if nearest is None:
        return flint.arb(2 * x.abs_upper())
    return flint.arb(nearest)


def _as_balls(levels: Any, depth: int, factor: RealBall, combination: BallMatrix | None) -> BallMatrix:
    """The levels side by side, padded to the depth."""
    parts = [flint.acb_mat(level) * factor for level in levels]
    if combination is not None:
        parts = [part * combination for part in parts]
    size, width = parts[0].nrows(), parts[0].ncols()
    parts += [flint.acb_mat(size, width)] * (depth - len(parts))
    tables = [part.table() for part in parts]
    return flint.acb_mat([[value for table in tables for value in table[i]] for i in range(size)])


def _columns(matrix: BallMatrix, first: int, count: int) -> BallMatrix:
    return flint.acb_mat([row[first : first + count] for row in matrix.table()])


def _by_levels(resolvent: BallMatrix, right: BallMatrix, depth: int, width: int) -> BallMatrix:
    """Solve ``(resolvent^-1 + D) u = right``, D the shift to the next power of the logarithm."""
    if depth == 1:
        return resolvent * right
    tables: list[Any] = [None] * depth
    above = None
    for k in reversed(range(depth)):
        source = _columns(right, k * width, width)
        above = resolvent * (source if above is None else source - above)
        tables[k] = above.table()
    return flint.acb_mat([[value for table in tables for value in table[i]] for i in range(right.nrows())])


def _assembled(
    local: Local,
    total: BallMatrix,
    rest: RealBall,
    bounds: Majorant,
    x: Ball,
    log: Ball,
    depth: int,
    width: int,
    bits: int,
) -> BallMatrix:
    """Sum over the powers of the logarithm, restore exponent and gauge."""
    point = local.point
    with precision(bits):
        weight, largest = flint.acb(1), flint.arb(1)
        value = _columns(total, 0, width)
        for k in range(1, depth):
            weight = weight * log / k
            largest = largest.max(weight.abs_upper())
            value = value + _columns(total, k * width, width) * weight
        value = widened_matrix(value, (rest * largest).upper(), bounds.weights, bits)
        exponent = local.formal.exponent
        phase = (log * flint.arb(fmpq(exponent))).exp()
        rows = []
        for power, row in zip(point.gauge, value.table(), strict=True):
            factor = phase * x**power
            rows.append([factor * entry for entry in row])
        return flint.acb_mat(rows)
