"""Solutions carried along a path of ordinary points, and out of and into singular points."""

from __future__ import annotations

import itertools
from collections.abc import Mapping
from fractions import Fraction

import flint

from ibpred.balls.context import Ball, complex_ball, precision
from ibpred.diffeq.system import DifferentialSystem
from ibpred.numerics.frobenius.path import Path, approximate, planned
from ibpred.numerics.frobenius.poles import PartialFractions, partial_fractions
from ibpred.numerics.frobenius.series import taylor_step
from ibpred.numerics.frobenius.system import system_on_line
from ibpred.numerics.frobenius.tracks import BallMatrix, all_positions


def carried(fractions: PartialFractions, path: Path, values: BallMatrix, bits: int) -> BallMatrix:
    """Solutions at the end of a path from those at its start.

    Parameters
    ----------
    fractions
        The system.
    path
        Ordinary points, each in the disc of the one before (see `ibpred.numerics.frobenius.path`).
    values
        Solutions at the start, one a column.
    bits
        Working precision; the radii of the result are rigorous.

    Raises
    ------
    PrecisionError
        If a step is too wide or the precision too low.
    """
    for here, there in itertools.pairwise(path):
        values = taylor_step(fractions, complex_ball(*here, bits), complex_ball(*there, bits), values, bits)
    return values


def masters_along(
    system: DifferentialSystem,
    start: Mapping[str, Fraction],
    end: Mapping[str, Fraction],
    side: int,
    eps: Fraction,
    values: list[Ball],
    bits: int,
) -> list[Ball]:
    """Masters at one kinematic point from their values at another, at a fixed eps.

    Parameters
    ----------
    system
        The differential equations.
    start, end
        Ordinary points, joined by ``start + x (end - start)``.
    side
        On which side x passes singular points between 0 and 1: +1 above, -1 below, 0 if there are none.
    eps
        A rational number.
    values
        The masters at the start.
    bits
        Working precision.

    Raises
    ------
    PointError
        If the line or an end is singular, or no path is found.
    PrecisionError
        If the precision is too low.
    """
    fractions = partial_fractions(system_on_line(system, start, end, eps))
    poles = approximate(all_positions(fractions, 64))
    zero, one = Fraction(0), Fraction(1)
    path = planned(poles, (zero, zero), (one, zero), side)
    with precision(bits):
        column = flint.acb_mat([[value] for value in values])
    return list(carried(fractions, path, column, bits).entries())
