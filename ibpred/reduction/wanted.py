"""The integrals that a user asks for: checks, and their places in the equations."""

from __future__ import annotations

from collections.abc import Sequence

from ibpred.errors import InputError
from ibpred.exact.rational import Rational
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.family.members import integral_text
from ibpred.identities.quantities import Quantity

Combination = tuple[tuple[int, Rational], ...]
"""(index of a master, coefficient), masters ascending, no zero coefficients."""


def single(family: FamilyDefinition, powers: Powers) -> Quantity:
    """The quantity that is one integral."""
    one = {(0,) * len(family.internal_ring.names): 1}
    return Quantity(integral_text(family.name, powers), one, ((powers, one),))


def check_powers(family: FamilyDefinition, powers: Sequence[int]) -> None:
    """Check that powers name an integral of the family.

    Raises
    ------
    InputError
        If their number is not the number of lines, or a numerator has a positive power.
    """
    text = f"{family.name}({','.join(map(str, powers))})"
    if len(powers) != len(family.lines):
        raise InputError(f"{text}: {len(family.lines)} powers are needed, {len(powers)} are given")
    for number, (power, line) in enumerate(zip(powers, family.lines, strict=True), start=1):
        if line.numerator and power > 0:
            raise InputError(
                f"{text}: line {number} ({line.text}) is a numerator, so its power must not be positive"
            )
