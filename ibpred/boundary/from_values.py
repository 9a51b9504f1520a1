"""Boundary constants that the conditions leave open, recognised from values of the functions at one point."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction

from ibpred.balls.accuracy import bits_for
from ibpred.balls.context import Ball, precision
from ibpred.boundary.conditions.explore import BoundaryProblem
from ibpred.boundary.conditions.fix import Fitted, OpenConstantsError
from ibpred.boundary.recognise import blurred, recognise
from ibpred.errors import BoundaryError
from ibpred.iterated.constants.constants import ZERO, Constant
from ibpred.iterated.solution import Solution, solve_orders
from ibpred.iterated.solution_values import solution_values


def fitted_constants(
    problem: BoundaryProblem,
    complaint: OpenConstantsError,
    values: Sequence[Sequence[Ball]],
    first: int,
    point: Mapping[str, Fraction],
    digits: int,
    generators: Sequence[str],
    odds: int,
) -> tuple[Fitted, ...]:
    """Recognise what is open, for `ibpred.boundary.conditions.fix.fix_constants`.

    At each order the open constants are what is left of the value when all words with the constants of lower
    orders are taken off; they must be of uniform weight, counted from the order at which the first function
    begins. Before that order they vanish.

    Parameters
    ----------
    problem
        The problem.
    complaint
        What is open and what is known.
    values
        ``values[k][i]``: canonical function i at ``eps^(first + k)``, at the point; of a real problem only
        the real part is used.
    first
        An order before which all functions vanish.
    point
        Positive ratios; no letter vanishes on the way to them, unless the functions are regular there.
    digits
        To which the words are computed, at least those of the values.
    generators, odds
        As for `ibpred.boundary.recognise.recognise`.

    Raises
    ------
    BoundaryError
        If a constant is not recognised (names function and order).
    InputError
        If a letter is not linear at its level.
    """
    last = max(order for order, _ in complaint.open)
    start = _start(complaint, values, first)
    constants: list[tuple[Constant, ...]] = []
    found = []
    for order, vector in enumerate(values[: max(last - first + 1, 0)], start=first):
        words: Sequence[Ball | int] = (0,) * len(vector)
        if order >= start:
            blank = (ZERO,) * len(vector)
            solution = solve_orders(problem.form, problem.corner, [*constants, blank], order, start)
            here = Solution(solution.levels, order, solution.orders[-1:])
            words = solution_values(here, point, digits)[0]
        weights = (order - start,) if order >= start else ()
        row: list[Constant] = []
        for i, (value, part) in enumerate(zip(vector, words, strict=True)):
            if (order, i) not in complaint.open:
                row.append(complaint.known.get((order, i), ZERO))
                continue
            with precision(bits_for(digits) + 64):
                rest = blurred(value - part, digits)
                rest = type(rest)(rest.real) if problem.real else rest
            fit = recognise(rest, weights, generators, odds)
            if fit is None:
                raise BoundaryError(
                    f"the constant of canonical function {i + 1} ({problem.masters[i].label}) at "
                    f"eps^{order}, {rest.str(12)}, is no combination of {', '.join(generators)} of "
                    f"weight {order - start} that chance would not give as well"
                )
            row.append(fit.constant)
            found.append(Fitted(i, order, fit))
        if order >= start:
            constants.append(tuple(row))
    return tuple(found)


def _start(complaint: OpenConstantsError, values: Sequence[Sequence[Ball]], first: int) -> int:
    """The order at which the first function begins: by what is known, or by a value that is not zero."""
    orders = [order for (order, _), constant in complaint.known.items() if constant]
    orders += [
        order
        for order, vector in enumerate(values, start=first)
        for i, value in enumerate(vector)
        if (order, i) in complaint.open and not value.contains(0)
    ]
    return min(orders, default=first)
