"""Boundary constants that the conditions leave open, recognised from values of the functions at one point."""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from fractions import Fraction

from ibpred.balls.accuracy import bits_for
from ibpred.balls.context import Ball, precision
from ibpred.boundary.explore import BoundaryProblem
from ibpred.boundary.fix import Fitted
from ibpred.boundary.recognise import recognise
from ibpred.errors import BoundaryError
from ibpred.iterated.constants import ZERO, Constant
from ibpred.iterated.solution import Solution, solve_orders
from ibpred.iterated.solution_values import solution_values


def fitted_constants(
    problem: BoundaryProblem,
    wanted: Collection[tuple[int, int]],
    values: Sequence[Sequence[Ball]],
    start: int,
    point: Mapping[str, Fraction],
    digits: int,
    generators: Sequence[str],
    odds: int,
) -> tuple[Fitted, ...]:
    """Recognise what is open, for `ibpred.boundary.fix.fix_constants`.

    At each order the constants are what is left of the value when all words with the constants of lower
    orders are taken off; they must be of uniform weight.

    Parameters
    ----------
    problem
        The problem.
    wanted
        What is open: pairs (power of eps, canonical function), as an `OpenConstantsError` tells them.
    values
        ``values[k][i]``: canonical function i at ``eps^(start + k)``, real, at the point.
    start
        The order at which the first function begins; weights count from there.
    point
        Positive ratios.
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
    last = max((order for order, _ in wanted), default=start - 1)
    constants: list[tuple[Constant, ...]] = []
    found = []
    for k, vector in enumerate(values[: max(last - start + 1, 0)]):
        blank = (ZERO,) * len(vector)
        solution = solve_orders(problem.form, problem.corner, [*constants, blank], start + k, start)
        here = Solution(solution.levels, start + k, solution.orders[-1:])
        words = solution_values(here, point, digits)[0]
        row: list[Constant] = []
        for i, (value, part) in enumerate(zip(vector, words, strict=True)):
            with precision(bits_for(digits) + 64):
                rest = type(value)((value - part).real)
            fit = recognise(rest, (k,), generators, odds)
            if fit is None:
                raise BoundaryError(
                    f"the constant of canonical function {i + 1} ({problem.masters[i].label}) at "
                    f"eps^{start + k}, {rest.str(12)}, is no combination of {', '.join(generators)} of "
                    f"weight {k} that chance would not give as well"
                )
            row.append(fit.constant)
            if (start + k, i) in wanted:
                found.append(Fitted(i, start + k, fit))
        constants.append(tuple(row))
    return tuple(found)
