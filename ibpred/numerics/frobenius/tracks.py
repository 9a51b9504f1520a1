"""The system around a centre as running sums of balls.

In ``t = (x - c)/scale`` a pole at t = delta of order k contributes ``C_k F/(t - delta)^k``. With
``g_k = F f/(t - delta)^k`` the coefficients obey ``g_1[n] = (g_1[n-1] - F f[n])/delta`` and
``g_k[n] = (g_k[n-1] - g_{k-1}[n])/delta``, and nothing grows. (The recurrence of the system multiplied by
its denominators loses all digits to the growth of its terms.)
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import flint

from ibpred.balls.context import Ball, RealBall, precision
from ibpred.errors import PrecisionError
from ibpred.numerics.frobenius.poles import PartialFractions, Pole
from ibpred.numerics.frobenius.spectrum import ExactMatrix

BallMatrix = Any
"""``flint.acb_mat``."""


@dataclass(frozen=True)
class Track:
    """One pole seen from the centre.

    Attributes
    ----------
    position
        delta.
    rows
        F, r x n.
    columns
        C_1, C_2, ..., n x r.
    """

    position: Ball
    rows: BallMatrix
    columns: tuple[BallMatrix, ...]


@dataclass(frozen=True)
class Tracks:
    """A system around a centre: ``df/dt = (residue/t + sum_tracks + sum_j polynomial_j t^j) f``.

    Attributes
    ----------
    size
        Number of functions.
    scale
        ``x - c = scale t``.
    tracks
        The poles away from the centre.
    polynomial
        P_0, P_1, ...; empty where there is none.
    """

    size: int
    scale: RealBall
    tracks: tuple[Track, ...]
    polynomial: tuple[BallMatrix, ...]

    def radius(self) -> RealBall | None:
        """Lower bound of the distance (in t) to the nearest pole; None where there is none."""
        if not self.tracks:
            return None
        with precision(64):
            least = self.tracks[0].position.abs_lower()
            for track in self.tracks[1:]:
                least = least.min(track.position.abs_lower())
            return least


def pole_positions(pole: Pole, bits: int) -> list[Ball]:
    """The zeros of a pole's factor as balls."""
    exact = pole.position()
    with precision(bits):
        if exact is not None:
            return [flint.acb(flint.arb(exact.numerator) / exact.denominator)]
        return [root for root, _ in pole.factor.numer().complex_roots()]


def all_positions(fractions: PartialFractions, bits: int) -> list[Ball]:
    """All poles as balls."""
    return [position for pole in fractions.poles for position in pole_positions(pole, bits)]


def tracks_around(
    fractions: PartialFractions,
    centre: Ball,
    scale: RealBall,
    bits: int,
) -> Tracks:
    """The system around a centre.

    Parameters
    ----------
    fractions
        The system; a pole exactly at the centre is left out (its residue is treated by itself).
    centre, scale
        ``x = centre + scale t``.
    bits
        Working precision.

    Raises
    ------
    PrecisionError
        If a pole cannot be told from the centre.
    """
    found = []
    with precision(bits):
        for pole in fractions.poles:
            exact = pole.position()
            if exact == 0 and centre.is_zero():
                continue
            rows = flint.acb_mat(pole.rows)
            columns = [[flint.acb_mat(part) for part in parts] for parts in pole.columns]
            for position in pole_positions(pole, bits):
                delta = (position - centre) / scale
                if delta.contains(0):
                    raise PrecisionError(
                        f"a singular point cannot be told from the centre of a series at {bits} bits; raise "
                        "the working precision"
                    )
                found.append(Track(delta, rows, _laurent(pole, columns, position, scale)))
        polynomial = _moved(fractions.polynomial, centre, scale)
    return Tracks(fractions.size, scale, tuple(found), tuple(polynomial))


def _laurent(
    pole: Pole, columns: Sequence[Sequence[BallMatrix]], position: Ball, scale: RealBall
) -> tuple[BallMatrix, ...]:
    """Coefficients of 1/(t - delta)^k at one zero of the factor."""
    order, degree = pole.order, pole.factor.degree()
    if degree == 1:
        return tuple(parts[0] / scale ** (k - 1) for k, parts in enumerate(columns, start=1))
    # q(x) = (x - a) q_1(x): expand x^j/q_1^k around a
    derivative = pole.factor
    around = []
    for i in range(order + 1):
        around.append(flint.acb_poly(derivative)(position))
        derivative = derivative.derivative() / (i + 1)
    cofactor = _inverse_series(around[1:], order)
    powers = [_power_series(position, j, order) for j in range(degree)]
    total: list[BallMatrix] = [0 * columns[0][0] for _ in range(order)]
    weight = [flint.acb(1)] + [flint.acb(0)] * (order - 1)
    for k, parts in enumerate(columns, start=1):
        weight = _product(weight, cofactor)
        for j, part in enumerate(parts):
            series = _product(powers[j], weight)
            for i in range(k):
                total[k - i - 1] = total[k - i - 1] + part * series[i]
    return tuple(matrix / scale ** (k - 1) for k, matrix in enumerate(total, start=1))


def _product(left: Sequence[Ball], right: Sequence[Ball]) -> list[Ball]:
    return [sum((left[i] * right[n - i] for i in range(n + 1)), flint.acb(0)) for n in range(len(left))]


def _inverse_series(series: Sequence[Ball], length: int) -> list[Ball]:
    found = [1 / series[0]]
    for n in range(1, length):
        total = sum((series[i] * found[n - i] for i in range(1, n + 1)), flint.acb(0))
        found.append(-total * found[0])
    return found


def _power_series(value: Ball, exponent: int, length: int) -> list[Ball]:
    """``(value + h)^exponent`` through ``h^(length - 1)``."""
    found = []
    for i in range(length):
        if i > exponent:
            found.append(flint.acb(0))
        else:
            binomial = int(flint.fmpz.bin_uiui(exponent, i))
            found.append(binomial * value ** (exponent - i))
    return found


def _moved(polynomial: Sequence[ExactMatrix], centre: Ball, scale: RealBall) -> list[BallMatrix]:
    """``sum_j P_j (centre + scale t)^j`` times scale, by powers of t."""
    found: list[BallMatrix] = []
    for i in range(len(polynomial)):
        total = None
        for j in range(i, len(polynomial)):
            binomial = int(flint.fmpz.bin_uiui(j, i))
            part = flint.acb_mat(polynomial[j]) * (binomial * centre ** (j - i))
            total = part if total is None else total + part
        found.append(total * scale ** (i + 1))
    return found


@dataclass(frozen=True)
class Chain:
    """The running sums of one pole.

    Attributes
    ----------
    inverse
        1/delta.
    rows
        F; None where it is better absorbed into the columns.
    columns
        C_1, C_2, ...
    """

    inverse: Ball
    rows: BallMatrix | None
    columns: tuple[BallMatrix, ...]


class RunningSums:
    """The sums of all poles while a series goes on: after `feed` of f[n], `drained` is ``(sum_tracks f)[n]``.

    Parameters
    ----------
    tracks
        The system around the centre.
    width
        Number of columns of the coefficients.
    """

    def __init__(self, tracks: Tracks, width: int) -> None:
        self._size, self._width = tracks.size, width
        self._chains = tuple(_chain(track, tracks.size) for track in tracks.tracks)
        self._sums = [
            [flint.acb_mat(columns.ncols(), width) for columns in chain.columns] for chain in self._chains
        ]

    def feed(self, coefficient: BallMatrix) -> None:
        """Take one more coefficient, at the precision that is set."""
        for chain, sums in zip(self._chains, self._sums, strict=True):
            below = coefficient if chain.rows is None else chain.rows * coefficient
            for k, total in enumerate(sums):
                below = (total - below) * chain.inverse
                sums[k] = below

    def drained(self) -> BallMatrix:
        """What the poles contribute to the next coefficient."""
        total = flint.acb_mat(self._size, self._width)
        for chain, sums in zip(self._chains, self._sums, strict=True):
            for columns, part in zip(chain.columns, sums, strict=True):
                total = total + columns * part
        return total


def _chain(track: Track, size: int) -> Chain:
    inverse = 1 / track.position
    if 2 * track.rows.nrows() < size:
        return Chain(inverse, track.rows, track.columns)
    return Chain(inverse, None, tuple(columns * track.rows for columns in track.columns))
