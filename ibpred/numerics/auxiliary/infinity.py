"""The solution at large auxiliary mass: formal solutions matched to the regions."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import flint

from ibpred.balls.context import Ball, precision
from ibpred.errors import BoundaryError
from ibpred.numerics.auxiliary.curved import FLATNESS
from ibpred.numerics.auxiliary.families import MASS
from ibpred.numerics.auxiliary.plan import Flow, Row, Straightening
from ibpred.numerics.frobenius.formal import (
    FormalClass,
    SingularPoint,
    formal_class,
    resonance,
    singular_point,
)
from ibpred.numerics.frobenius.spectrum import ExactMatrix, fractional_part, pivot_columns
from ibpred.numerics.frobenius.system import (
    RationalSystem,
    Univariate,
    entry_valuation,
    fmpq,
    inverted,
    reduced_entry,
    system_in,
    univariate,
    valuation,
)
from ibpred.numerics.frobenius.tracks import BallMatrix


@dataclass(frozen=True)
class SeriesRow:
    """``sum_j row_j f_j`` with Laurent series at zero of the local variable.

    Attributes
    ----------
    start
        Column -> order of its leading term.
    entries
        Column -> the fraction.
    """

    start: Mapping[int, int]
    entries: Mapping[int, tuple[Univariate, Univariate]]

    def coefficients(self, column: int, count: int) -> list[Any]:
        """The first coefficients of an entry from its leading order on."""
        p, q = self.entries[column]
        top, bottom = p.right_shift(valuation(p)), q.right_shift(valuation(q))
        lead = flint.fmpq(bottom[0])
        found: list[Any] = []
        for n in range(count):
            total = flint.fmpq(top[n])
            for i in range(1, min(n, bottom.degree()) + 1):
                total -= flint.fmpq(bottom[i]) * found[n - i]
            found.append(total / lead)
        return found


def flow_system(flow: Flow | Straightening, eps: Fraction) -> RationalSystem:
    """The differential equations of a flow, or of a straightening, at a fixed eps."""
    return system_in(len(flow.masters), flow.matrix, _images(flow, eps))


def _images(flow: Flow | Straightening, eps: Fraction) -> dict[str, Univariate]:
    variable = flint.fmpq_poly([0, 1])
    return {"d": flint.fmpq_poly([fmpq(flow.dimension - 2 * eps)]), MASS: variable, FLATNESS: variable}


def series_row(flow: Flow | Straightening, row: Row, eps: Fraction, at_infinity: bool) -> SeriesRow:
    """A combination of the masters at a fixed eps, in the variable or in its inverse."""
    images = _images(flow, eps)
    entries = {}
    for column, value in row:
        places = [images[name] for name in value.ring.names]
        entry = reduced_entry(univariate(value.numerator, places), univariate(value.denominator, places))
        if at_infinity:
            entry = _inverted(entry)
        entries[column] = entry
    return SeriesRow({column: entry_valuation(entry) for column, entry in entries.items()}, entries)


def _inverted(entry: tuple[Univariate, Univariate]) -> tuple[Univariate, Univariate]:
    p, q = entry
    top, bottom = (flint.fmpq_poly(list(reversed(part.coeffs()))) for part in (p, q))
    power = q.degree() - p.degree()
    if power >= 0:
        return reduced_entry(top.left_shift(power), bottom)
    return reduced_entry(top, bottom.left_shift(-power))


def lowest_order(point: SingularPoint, row: SeriesRow) -> int:
    """The least power, relative to the class exponent, that a combination can have."""
    return min(start + point.gauge[column] for column, start in row.start.items())


def expanded(
    point: SingularPoint, formal: FormalClass, row: SeriesRow, order: int
) -> dict[tuple[int, int], list[Any]]:
    """Coefficients of ``x^(lambda + s) L^k/k!`` of a combination for every solution, s <= order, exactly.

    The class must hold ``order - lowest_order(point, row) + 1`` terms.
    """
    found: dict[tuple[int, int], list[Any]] = {}
    width = formal.solutions
    basis = point.spectrum.basis
    for column, start in row.start.items():
        first = start + point.gauge[column]
        if first > order:
            continue
        series = row.coefficients(column, order - first + 1)
        line = flint.fmpq_mat([[basis[column, i] for i in range(point.size)]])
        for n in range(order - first + 1):
            for k, level in enumerate(formal.terms[n]):
                values = (line * level).entries()
                if not any(values):
                    continue
                for i, factor in enumerate(series[: order - first + 1 - n]):
                    if factor:
                        target = found.setdefault((first + n + i, k), [flint.fmpq(0)] * width)
                        for c in range(width):
                            target[c] += factor * values[c]
    return found


@dataclass(frozen=True)
class Equation:
    """``coefficients . x = value`` for the free constants of a class.

    Attributes
    ----------
    coefficients
        One for each solution.
    condition
        Index of the condition whose leading coefficient stands on the right; None for zero.
    """

    coefficients: tuple[Any, ...]
    condition: int | None


@dataclass(frozen=True)
class ClassAtInfinity:
    """One class of solutions at infinity that a region can excite.

    Attributes
    ----------
    loops
        Number of hard loops.
    formal
        The solutions in z = 1/eta.
    equations
        Exact equations for their coefficients.
    pivots
        Indices of independent equations; as many as solutions where the conditions suffice.
    """

    loops: int
    formal: FormalClass
    equations: tuple[Equation, ...]
    pivots: tuple[int, ...]


@dataclass(frozen=True)
class AtInfinity:
    """Infinite auxiliary mass."""

    point: SingularPoint
    classes: tuple[ClassAtInfinity, ...]


def leading_power(flow: Flow, eps: Fraction, loops: int, power: int) -> Fraction:
    """The exponent of z = 1/eta of a region."""
    return Fraction(power) - loops * (Fraction(flow.dimension, 2) - eps)


def at_infinity(flow: Flow, eps: Fraction, loops: int) -> AtInfinity:
    """Formal solutions at infinity and the equations that the regions give.

    Parameters
    ----------
    flow
        The flow.
    eps
        Not a special value.
    loops
        L.
    """
    point = singular_point(inverted(flow_system(flow, eps)), f"infinite auxiliary mass of {flow.family}")
    rows = [series_row(flow, condition.row, eps, at_infinity=True) for condition in flow.conditions]
    present = point.spectrum.classes()
    found = []
    for hard in range(loops + 1):
        residue_class = fractional_part(leading_power(flow, eps, hard, 0))
        if residue_class not in present:
            continue
        base, last = resonance(point, residue_class)
        leading: list[int | None] = []
        for condition in flow.conditions:
            powers = [term.power for term in condition.terms if term.loops == hard]
            leading.append(int(leading_power(flow, eps, hard, min(powers)) - base) if powers else None)
        count = last + 1
        for row, order in zip(rows, leading, strict=True):
            if order is not None and row.start:
                count = max(count, order - lowest_order(point, row) + 1)
        formal = formal_class(point, residue_class, count)
        count = len(formal.terms)
        equations = []
        for index, (row, order) in enumerate(zip(rows, leading, strict=True)):
            if not row.start:
                continue
            top = lowest_order(point, row) + count - 1 if order is None else order
            coefficients = expanded(point, formal, row, top)
            for (s, k), values in sorted(coefficients.items()):
                own = index if order is not None and s == order and k == 0 else None
                equations.append(Equation(tuple(values), own))
            if order is not None and (order, 0) not in coefficients:
                equations.append(Equation((flint.fmpq(0),) * formal.solutions, index))
        equations.sort(key=lambda equation: equation.condition is not None)
        found.append(
            ClassAtInfinity(hard, formal, tuple(equations), _independent(equations, formal.solutions))
        )
    return AtInfinity(point, tuple(found))


def _independent(equations: Sequence[Equation], width: int) -> tuple[int, ...]:
    if not equations:
        return ()
    matrix = flint.fmpq_mat([list(equation.coefficients) for equation in equations]).transpose()
    echelon, rank = matrix.rref()
    return tuple(pivot_columns(echelon, rank))


def undetermined(place: AtInfinity) -> int:
    """How many constants the conditions leave open."""
    return sum(part.formal.solutions - len(part.pivots) for part in place.classes)


def solution(
    flow: Flow, part: ClassAtInfinity, leading: Sequence[Ball], bits: int
) -> tuple[FormalClass, BallMatrix]:
    """The solution of a class as a combination of formal solutions.

    Parameters
    ----------
    flow, part
        The flow and the class.
    leading
        For each condition its leading coefficient in this class (zero where there is none).
    bits
        Working precision.

    Returns
    -------
    Formal solutions, and a column of coefficients. Each solution belongs to one independent equation, so the
    coefficients are leading coefficients of regions.

    Raises
    ------
    BoundaryError
        If the conditions leave constants open or contradict each other.
    """
    width = part.formal.solutions
    if len(part.pivots) < width:
        raise BoundaryError(
            f"{flow.family}: {width - len(part.pivots)} constants at infinite auxiliary mass on the line "
            f"{flow.line} stay open"
        )
    square: ExactMatrix = flint.fmpq_mat([list(part.equations[i].coefficients) for i in part.pivots])
    inverse = square.inv()
    every = flint.fmpq_mat([list(e.coefficients) for e in part.equations]) * inverse
    with precision(bits):
        zero = flint.acb(0)
        right = [zero if e.condition is None else leading[e.condition] for e in part.equations]
        column = flint.acb_mat([[right[i]] for i in part.pivots])
        predicted = flint.acb_mat(every) * column
        for i, value in enumerate(right):
            if not (predicted[i, 0] - value).contains(0):
                at = part.equations[i].condition
                name = "an integral that should vanish" if at is None else str(flow.conditions[at].powers)
                raise BoundaryError(
                    f"{flow.family}: the regions at infinite auxiliary mass on {flow.line} contradict"
                    f" the differential equation at {name} ({part.loops} hard loops)"
                )
    excited = [i for i in range(width) if not column[i, 0].is_zero()]
    choice = flint.fmpq_mat([[inverse[i, j] for j in excited] for i in range(width)])
    return part.formal.combined(choice), flint.acb_mat([[column[i, 0]] for i in excited])
