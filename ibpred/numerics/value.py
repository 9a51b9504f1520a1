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
        """Digits to which every coefficient is known; None where all are exact.

        They count relative to the modulus of the coefficient. One whose ball holds zero (it vanishes, as a
        rule, but that is not proven) counts relative to the largest coefficient of the integral, or to one
        where that is smaller.
        """
        sizes = [_size(ball) for ball in self.epsilon.values()]
        largest = max([Decimal(1), *sizes])
        reached = []
        for ball, size in zip(self.epsilon.values(), sizes, strict=True):
            radius = Decimal(ball.radius)
            if radius:
                reached.append(max(0, ((size if size > radius else largest) / radius).adjusted()))
        return min(reached, default=None)


def _size(ball: DecimalBall) -> Decimal:
    return max(abs(Decimal(ball.re)), abs(Decimal(ball.im)))
