"""The record of a number: an integral's Laurent coefficients with their errors."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from decimal import Decimal
from enum import Enum

from ibpred.balls.decimal import DecimalBall
from ibpred.family.definition import Powers


class Route(Enum):
    """How a value was obtained."""

    EPSILON_FORM = "epsilon-form"
    REGIONS = "regions at a corner"
    LIMIT = "limit of the expansion there"
    CONTINUATION = "continuation"
    AUXILIARY_MASS = "auxiliary mass"


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
    route
        How it was obtained; None where that is not recorded.
    """

    powers: Powers
    epsilon: Mapping[int, DecimalBall]
    certified: bool
    route: Route | None = None

    def digits(self) -> int | None:
        """Digits to which every coefficient is known, relative to its modulus; None where all are exact."""
        reached = [found for ball in self.epsilon.values() if (found := _digits(ball)) is not None]
        return min(reached, default=None)


def _digits(ball: DecimalBall) -> int | None:
    radius = Decimal(ball.radius)
    if not radius:
        return None
    size = max(abs(Decimal(ball.re)), abs(Decimal(ball.im)))
    return (size / radius).adjusted() if size > radius else 0
