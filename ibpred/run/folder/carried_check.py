"""Values at one point of a folder against those at another, joined by the differential equations alone."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from fractions import Fraction
from typing import Any

from ibpred.balls.accuracy import bits_for
from ibpred.balls.context import Ball, precision
from ibpred.balls.decimal import DecimalBall, ball_of_decimal
from ibpred.diffeq.checks import CheckResult
from ibpred.diffeq.derive import singular_locus
from ibpred.diffeq.system import DifferentialSystem
from ibpred.errors import PointError
from ibpred.exact.grammar import parse_number
from ibpred.numerics.laurent.crossings import crossings
from ibpred.numerics.laurent.expanded import expanded_system
from ibpred.numerics.laurent.laurent_line import (
    carry_laurent,
    laurent_line,
    line_depth,
    regular_locus,
    spread,
)
from ibpred.progress import SILENT, Progress

_DIGITS = 15  # a wrong side of a threshold or a wrong constant shows in the first
_SPARE_BITS = 64
_ROWS = 50  # of the system of all orders together; of more masters fewer orders are carried

Data = Mapping[str, Any]


def carried_check(
    system: DifferentialSystem,
    signs: Mapping[str, int] | None,
    start: Data,
    end: Data,
    progress: Progress = SILENT,
) -> CheckResult | None:
    """Carry the masters from one table to the point of another and compare.

    No epsilon-form, iterated integral or boundary constant enters, and the sides on which thresholds are
    passed are taken from i0 anew.

    Parameters
    ----------
    system
        The differential equations.
    signs
        Euclidean signs of the invariants; None where there are none, so that no threshold may be passed.
    start, end
        Tables of values as `evaluate` prints them, of all masters in order; the first at a Euclidean point if
        there is one.
    progress
        Told about the steps of the way.

    Returns
    -------
    outcome
        None where no line leads from one point to the other, or the values at the start reach no order at
        the end that could be compared.
    """
    known = _balls(start)
    others = _balls(end)
    expanded = expanded_system(system, 0)
    highest = min(max(values, default=0) for values in known) - spread(expanded)
    lowest = min((k + r for values, r in zip(known, expanded.shifts, strict=True) for k in values), default=0)
    depth = line_depth(expanded.shifts, lowest, highest)
    spared = max(0, depth - max(1, _ROWS // len(known)))
    highest, depth = highest - spared, depth - spared
    if all(min(values, default=0) > highest for values in others):
        return None
    full = expanded_system(system, depth)
    locus = regular_locus(_with_locus(system))
    if signs is None:
        turns = dict.fromkeys(system.variables, 0)
    else:
        turns = {name: -sign for name, sign in signs.items()}
    try:
        if signs is None and crossings(locus, _point(start), _point(end), turns):
            return None
        line = laurent_line(full, locus, _point(start), _point(end), turns)
    except PointError:
        return None
    bits = bits_for(_DIGITS) + _SPARE_BITS
    carried = carry_laurent(line, known, lowest, highest, bits, progress)
    wrong = []
    with precision(bits):
        for number, (got, told) in enumerate(zip(carried, others, strict=True), start=1):
            orders = [k for k in sorted({*got, *told}) if k <= highest]
            if not all(_agree(got.get(k), told.get(k)) for k in orders):
                wrong.append(str(number))
    place = ", ".join(f"{name} = {value}" for name, value in end["point"].items())
    euclidean = signs is not None and all(v * signs[name] > 0 for name, v in _point(start).items())
    origin = "the Euclidean point" if euclidean else "another point of the region"
    detail = (
        f"the masters at {place} through eps^{highest} follow from those at {origin} to "
        f"{min(_DIGITS, int(start['digits']))} digits"
    )
    if wrong:
        detail = f"masters {', '.join(wrong)} at {place} do not follow from {origin}"
    return CheckResult("continuation", not wrong, detail)


def _with_locus(system: DifferentialSystem) -> DifferentialSystem:
    """A system read from a file, its singular locus found again."""
    return replace(system, singular_locus=singular_locus(system.matrices))


def _agree(one: Ball | None, other: Ball | None) -> bool:
    """Whether two balls overlap; what is missing is zero."""
    if one is None or other is None:
        present = other if one is None else one
        return present is None or present.contains(0)
    return bool(one.overlaps(other))


def _point(table: Data) -> dict[str, Fraction]:
    return {name: parse_number(text) for name, text in table["point"].items()}


def _balls(table: Data) -> list[dict[int, Ball]]:
    bits = bits_for(int(table["digits"])) + _SPARE_BITS
    return [
        {
            int(order): ball_of_decimal(DecimalBall(part["re"], part["im"], part["radius"]), bits)
            for order, part in value["epsilon"].items()
        }
        for value in table["integrals"]
    ]
