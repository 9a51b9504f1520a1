"""The record of a number: an integral's Laurent coefficients with their errors."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from ibpred.balls.decimal import DecimalBall
from ibpred.family.definition import Powers


@dataclass(frozen=True)
class Value:
    """An integral at a point.

    Attributes
    ----------
    powers
        The integral.
    epsilon
        Power of eps -> coefficient; powers that are missing below the highest one vanish exactly.
    certified
        Whether the radii are rigorous (given the differential equation and its boundary constants), or
        estimates.
    """

    powers: Powers
    epsilon: Mapping[int, DecimalBall]
    certified: bool
