"""Rays in the kinematic space: a point, often a singular one, and the direction in which it is left."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

from ibpred.exact.rational import Rational
from ibpred.numerics.laurent.distance import DISTANCE


@dataclass(frozen=True)
class Ray:
    """``v = place + h direction`` with h -> 0+; directions that are missing are zero."""

    place: Mapping[str, Fraction]
    direction: Mapping[str, Fraction]

    def at(self, h: Fraction) -> dict[str, Fraction]:
        """The point at a distance."""
        return {name: value + h * self.direction.get(name, Fraction(0)) for name, value in self.place.items()}

    def images(self) -> dict[str, Rational]:
        """The invariants as functions of h."""
        h = DISTANCE.variable("h")
        return {name: h * self.direction.get(name, Fraction(0)) + value for name, value in self.place.items()}

    def text(self) -> str:
        """The point, for messages."""
        return ", ".join(f"{name} = {value}" for name, value in self.place.items())
