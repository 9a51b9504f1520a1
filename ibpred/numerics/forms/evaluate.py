"""Integrals at a point to a wanted number of digits, from a solved epsilon-form."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Protocol

from ibpred.balls.accuracy import bits_for, until_accurate
from ibpred.balls.context import Ball
from ibpred.balls.decimal import decimal_ball
from ibpred.epsform.form import EpsilonForm
from ibpred.errors import BoundaryError
from ibpred.iterated.constants.constants import Constant
from ibpred.numerics.forms.canonical import CanonicalSystem, Orders, SparseRows, sparse_rows
from ibpred.numerics.forms.continuation import evaluate_many
from ibpred.numerics.forms.masters import Row, assemble, by_root, needed_order
from ibpred.numerics.forms.path import Target
from ibpred.numerics.forms.rooted_paths import evaluate_rooted
from ibpred.numerics.forms.several import evaluate_several
from ibpred.numerics.forms.vanishing import vanishes
from ibpred.numerics.value import Route, Value

_SPARE_BITS = 64
_SPARE_DIGITS = 2


class Functions(Protocol):
    """Canonical functions that can be evaluated anywhere from their boundary constants."""

    @property
    def matrices(self) -> Sequence[SparseRows]:
        """One constant matrix for each letter."""

    @property
    def tags(self) -> Sequence[tuple[int, ...]]:
        """For each function its roots, as in the epsilon-form; empty where there are none."""

    def at(self, constants: Orders, targets: Sequence[Mapping[str, Target]], bits: int) -> Sequence[Orders]:
        """The functions, divided by their roots, at several points given by the ratios on their sheets."""


@dataclass(frozen=True)
class InOneRatio:
    """Functions of one ratio, or of none where there are no letters."""

    system: CanonicalSystem

    @property
    def matrices(self) -> Sequence[SparseRows]:
        return [letter.rows for letter in self.system.letters]

    @property
    def tags(self) -> Sequence[tuple[int, ...]]:
        return ()

    def at(self, constants: Orders, targets: Sequence[Mapping[str, Target]], bits: int) -> Sequence[Orders]:
        if not self.system.letters:
            return [constants] * len(targets)
        return evaluate_many(self.system, constants, [next(iter(t.values())) for t in targets], bits)


@dataclass(frozen=True)
class InSeveralRatios:
    """Functions of several ratios from their constants at a corner (the smallest ratio first)."""

    form: EpsilonForm
    corner: tuple[str, ...]

    @property
    def matrices(self) -> Sequence[SparseRows]:
        return [sparse_rows(matrix) for matrix in self.form.matrices]

    @property
    def tags(self) -> Sequence[tuple[int, ...]]:
        return ()

    def at(self, constants: Orders, targets: Sequence[Mapping[str, Target]], bits: int) -> Sequence[Orders]:
        return [evaluate_several(self.form, self.corner, constants, target, bits) for target in targets]


@dataclass(frozen=True)
class WithRoots:
    """Functions of a form with square roots from their constants at a corner (the smallest ratio first)."""

    form: EpsilonForm
    corner: tuple[str, ...]

    @property
    def matrices(self) -> Sequence[SparseRows]:
        return [sparse_rows(matrix) for matrix in (*self.form.matrices, *self.form.odd_matrices)]

    @property
    def tags(self) -> Sequence[tuple[int, ...]]:
        return self.form.tags

    def at(self, constants: Orders, targets: Sequence[Mapping[str, Target]], bits: int) -> Sequence[Orders]:
        return [evaluate_rooted(self.form, self.corner, constants, target, bits) for target in targets]


@dataclass(frozen=True)
class Place:
    """A kinematic point with the integrals wanted there.

    Attributes
    ----------
    rows
        The integrals, at the rational values of the ratios.
    ratios, unit
        The ratios on their sheets, and y_u.
    """

    rows: tuple[Row, ...]
    ratios: Mapping[str, Target]
    unit: Target


def evaluate_rows(
    system: CanonicalSystem,
    constants: Sequence[Sequence[Constant]],
    start: int,
    rows: Sequence[Row],
    ratio: Target,
    unit: Target,
    order: int,
    digits: int,
    max_bits: int,
) -> tuple[Value, ...]:
    """Values of integrals in one ratio at one point; see `evaluate_places`."""
    place = Place(tuple(rows), {"x": ratio}, unit)
    return evaluate_places(InOneRatio(system), constants, start, (place,), order, digits, max_bits)[0]


def evaluate_places(
    functions: Functions,
    constants: Sequence[Sequence[Constant]],
    start: int,
    places: Sequence[Place],
    order: int,
    digits: int,
    max_bits: int,
    certified: bool = True,
) -> tuple[tuple[Value, ...], ...]:
    """Values of integrals, rigorous given the canonical system and its boundary constants.

    Parameters
    ----------
    functions
        The canonical functions; without letters (one-scale families) they are the constants.
    constants, start
        Boundary constants ``constants[k][i]`` at the corner from ``eps^start`` on.
    places
        The points with their integrals.
    order
        Highest power of eps.
    digits
        Wanted digits of every coefficient, relative to its modulus.
    max_bits
        Highest working precision.
    certified
        Whether the values count as certified: whether the constants are derived, not fitted.

    Returns
    -------
    For every place one value a row, in order. A power is left out where its coefficient vanishes exactly.

    Raises
    ------
    BoundaryError
        If the constants stop before the power that is needed.
    PointError
        If a letter vanishes at a place.
    PrecisionError
        If `max_bits` does not suffice.
    """
    wanted = needed_order([row for place in places for row in place.rows], order)
    needed = start if wanted is None else max(wanted, start)
    if needed >= start + len(constants):
        raise BoundaryError(
            f"the integrals through eps^{order} need the canonical functions through eps^{needed}, the "
            f"boundary constants reach eps^{start + len(constants) - 1}; solve through weight "
            f"{needed - start}"
        )
    used = constants[: needed - start + 1]
    matrices = functions.matrices

    def compute(bits: int) -> list[list[dict[int, Ball]]]:
        at_base = tuple(tuple(c.ball(bits) for c in vector) for vector in used)
        values = functions.at(at_base, [place.ratios for place in places], bits)
        found = []
        for place, orders in zip(places, values, strict=True):
            of_place = []
            for row in place.rows:
                coefficients = assemble(row, orders, start, place.unit, order, bits)
                parts = by_root(row, functions.tags)
                of_place.append(_without_zeros(parts, coefficients, matrices, used, start, place.unit))
            found.append(of_place)
        return found

    results = until_accurate(
        compute,
        lambda found: [ball for place in found for coefficients in place for ball in coefficients.values()],
        digits,
        bits_for(digits) + _SPARE_BITS,
        max_bits,
    )
    return tuple(
        tuple(
            Value(
                row.powers,
                {power: decimal_ball(ball, digits + _SPARE_DIGITS) for power, ball in coefficients.items()},
                certified=certified,
                route=Route.EPSILON_FORM,
            )
            for row, coefficients in zip(place.rows, of_place, strict=True)
        )
        for place, of_place in zip(places, results, strict=True)
    )


def _without_zeros(
    parts: Sequence[Row],
    coefficients: dict[int, Ball],
    matrices: Sequence[SparseRows],
    constants: Sequence[Sequence[Constant]],
    start: int,
    unit: Target,
) -> dict[int, Ball]:
    """Leave out the powers whose coefficients vanish exactly."""
    at_one = unit.modulus == 1 and unit.half_turns == 0
    leading = True
    kept = {}
    for power, ball in sorted(coefficients.items()):
        if ball.is_zero():
            continue
        doubtful = (leading or at_one) and ball.contains(0)
        if doubtful and all(vanishes(part, matrices, constants, start, power) for part in parts):
            continue
        leading = False
        kept[power] = ball
    return kept
