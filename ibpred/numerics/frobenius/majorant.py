"""Rigorous bounds of the coefficients around a centre, in a weighted norm.

``|A_j| <= bound rho^-j`` entry by entry for the Taylor coefficients of A in t, and
``|v| = max_i |v_i|/w_i`` with weights w near the Perron vector of the bound: plain norms of real systems are
useless (10^8), this one is of the size of the exponents. Floating point is rounded outwards by a factor.
(Majorants for linear differential equations: Mezzarobba, Salvy, arXiv:0904.2452.)
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from math import comb, inf

import flint
import numpy as np

from ibpred.balls.context import RealBall, precision
from ibpred.errors import PrecisionError
from ibpred.numerics.frobenius.tracks import BallMatrix, Tracks
from ibpred.numerics.frobenius.weights import Floats, perron_weights

_OUTWARDS = 1 + 1e-9  # covers the rounding of sums of up to a million terms
_NORM_BITS = 64
_LEAST = 1e-300  # stands for smaller moduli, which a float cannot hold


@dataclass(frozen=True)
class Majorant:
    """``|A_j|_w <= size radius^-j`` for the coefficients of A around a centre.

    Attributes
    ----------
    weights
        w.
    size
        M.
    radius
        rho, in t.
    """

    weights: Floats
    size: float
    radius: float

    @cached_property
    def _scaling(self) -> BallMatrix:
        size = len(self.weights)
        with precision(_NORM_BITS):
            inverse = [1 / flint.arb(float(w)) for w in self.weights]
            return flint.acb_mat([[inverse[i] if i == j else 0 for j in range(size)] for i in range(size)])

    def norm(self, matrix: BallMatrix) -> float:
        """Upper bound of the largest weighted norm of a column.

        The root of the sum of all ``|v_i|^2/w_i^2`` bounds it, and takes two products of matrices only.
        """
        if not matrix.ncols():
            return 0.0
        with precision(_NORM_BITS):
            scaled = self._scaling * matrix
            adjoint = scaled.conjugate().transpose()
            square = scaled * adjoint if matrix.nrows() < matrix.ncols() else adjoint * scaled
            total = square.trace().real
            if not total.is_finite():
                raise PrecisionError(
                    "a series has coefficients that are not finite; raise the working precision"
                )
            if total.is_zero():
                return 0.0
            return max(float(total.abs_upper().sqrt().upper()), _LEAST) * _OUTWARDS


def majorant(tracks: Tracks, terms: int, besides: BallMatrix | None = None) -> Majorant:
    """Bound a system around a centre.

    Parameters
    ----------
    tracks
        The system; a simple pole at the centre itself plays no role.
    terms
        About how many terms the series will have: with multiple poles the radius is taken shorter by a
        relative 1/terms.
    besides
        A further matrix that is to be small in the norm.

    Raises
    ------
    PrecisionError
        If the entries are no finite numbers.
    """
    nearest = tracks.radius()
    radius = 1.0 if nearest is None else float(nearest.lower()) / _OUTWARDS
    multiple = max((len(track.columns) for track in tracks.tracks), default=1)
    if multiple > 1:
        radius *= 1 - multiple / (terms + 2 * multiple)
    bound = np.zeros((tracks.size, tracks.size))
    with precision(64):
        for track in tracks.tracks:
            distance = float(track.position.abs_lower().lower()) / _OUTWARDS
            for k, columns in enumerate(track.columns, start=1):
                bound += upper_bounds(columns * track.rows) * _largest(k, distance, radius)
        for j, matrix in enumerate(tracks.polynomial):
            bound += upper_bounds(matrix) * radius**j * _OUTWARDS
    bound *= _OUTWARDS
    if not np.isfinite(bound).all():
        raise PrecisionError("the coefficients around a centre are not finite; raise the working precision")
    weights = perron_weights(bound if besides is None else bound + upper_bounds(besides))
    size = float((bound @ weights / weights).max()) * _OUTWARDS
    return Majorant(weights, size, radius)


def operator_norm(matrix: BallMatrix, bounds: Majorant) -> float:
    """Upper bound of the weighted norm of a matrix."""
    values = upper_bounds(matrix)
    return float((values @ bounds.weights / bounds.weights).max(initial=0.0)) * _OUTWARDS


def upper_bounds(matrix: BallMatrix) -> Floats:
    """Upper bounds of the moduli of the entries."""
    found = [
        max(float(value.abs_upper()), _LEAST) if not value.is_zero() else 0.0 for value in matrix.entries()
    ]
    values: Floats = np.array(found, dtype=np.float64).reshape(matrix.nrows(), matrix.ncols())
    if not np.isfinite(values).all():
        raise PrecisionError("a series has coefficients that are not finite; raise the working precision")
    return values * _OUTWARDS


def _largest(order: int, distance: float, radius: float) -> float:
    """``max_j |coefficient of t^j in 1/(t - delta)^order| radius^j``."""
    ratio = radius / distance * _OUTWARDS
    if order == 1:
        return _OUTWARDS / distance if ratio <= _OUTWARDS * _OUTWARDS else inf
    # binomial(j + k - 1, k - 1) ratio^j rises while (j + k)/(j + 1) ratio > 1
    peak = 0 if order * ratio <= 1 else int((order * ratio - 1) / (1 - ratio)) + 1
    value: float = max(comb(j + order - 1, order - 1) * ratio**j for j in range(max(0, peak - 2), peak + 2))
    return value * _OUTWARDS / distance**order


@dataclass
class Tail:
    """Running bound of the remainder of ``sum_n f[n] t^n`` with ``f[n] = (A f)[n-1]/(n - lag)``.

    For n > N all later coefficients obey ``|f[n]| <= M/(n - lag) S_{n-1}`` with
    ``S_n = S_{n-1}/rho + |f[n]|``.
    """

    majorant: Majorant
    lag: float
    sum: float = 0.0

    def add(self, norm: float) -> None:
        """Take the next coefficient into account."""
        self.sum = (self.sum / self.majorant.radius + norm) * _OUTWARDS

    def remainder(self, last: int, size: RealBall) -> RealBall | None:
        """Bound of what follows the term of number `last` at ``|t| = size``; None if not bounded yet."""
        if last + 1 <= self.lag:
            return None
        rate = self.majorant.size / (last + 1 - self.lag) * _OUTWARDS
        fall = float(size.upper()) * (1 / self.majorant.radius + rate) * _OUTWARDS
        if not fall < 1:
            return None
        with precision(64):
            first = flint.arb(rate) * flint.arb(self.sum) * size ** (last + 1)
            return (first / (1 - flint.arb(fall))).upper()


def widened_matrix(matrix: BallMatrix, bound: RealBall, weights: Floats, bits: int) -> BallMatrix:
    """Every entry (i, c) enlarged by ``bound w_i``."""
    if bound.is_zero():
        return matrix
    with precision(bits):
        margins = [flint.arb(0, (bound * (float(w) * _OUTWARDS)).upper()) for w in weights]
        return flint.acb_mat(
            [
                [value + flint.acb(margin, margin) for value in row]
                for row, margin in zip(matrix.table(), margins, strict=True)
            ]
        )
