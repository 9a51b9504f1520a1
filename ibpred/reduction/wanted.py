"""Checks of the integrals that a user asks for."""

from __future__ import annotations

from collections.abc import Sequence

from ibpred.errors import InputError
from ibpred.family.definition import FamilyDefinition


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
