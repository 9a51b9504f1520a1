"""Exact constants at the base point from values of the canonical functions elsewhere."""

from __future__ import annotations

from collections.abc import Sequence

import flint

from ibpred.balls.context import Ball, precision
from ibpred.boundary.recognise import Fit, blurred, recognise
from ibpred.errors import BoundaryError
from ibpred.iterated.constants.constants import Constant
from ibpred.numerics.forms.canonical import CanonicalSystem
from ibpred.numerics.forms.continuation import evaluate_canonical
from ibpred.numerics.forms.path import Target


def constants_at_base(
    system: CanonicalSystem,
    values: Sequence[Sequence[Ball]],
    target: Target,
    generators: Sequence[str],
    odds: int,
    digits: int,
    bits: int,
) -> tuple[tuple[tuple[Constant, ...], ...], tuple[tuple[Fit, ...], ...]]:
    """Recognise the boundary constants at x -> 0+ of functions that are known at one point, order by order.

    At each order the constants are what is left of the values when the solution with the constants of lower
    orders is taken off; they must be of uniform weight.

    Parameters
    ----------
    system
        The canonical system in one ratio.
    values
        ``values[k][i]``: function i at the k-th order, the first at which one does not vanish coming first.
    target
        The point, reached from x -> 0+ as in `ibpred.numerics.forms.path`.
    generators, odds
        As for `ibpred.boundary.recognise.recognise`.
    digits
        To which the values are known at least.
    bits
        Working precision of the continuation.

    Returns
    -------
    tuple
        The constants, and the fit of each of them.

    Raises
    ------
    BoundaryError
        If a constant is not recognised (names function and order).
    """
    constants: list[tuple[Constant, ...]] = []
    fits: list[tuple[Fit, ...]] = []
    nothing = (flint.acb(0),) * system.size
    for weight, vector in enumerate(values):
        held = [tuple(c.ball(bits) for c in row) for row in constants]
        lower = evaluate_canonical(system, (*held, nothing), target, bits)[-1]
        found = []
        for i, (value, part) in enumerate(zip(vector, lower, strict=True)):
            with precision(bits):
                rest = blurred(value - part, digits)
            fit = recognise(rest, (weight,), generators, odds)
            if fit is None:
                raise BoundaryError(
                    f"the constant of canonical function {i + 1} at relative order {weight}, "
                    f"{rest.str(12)}, is no combination of {', '.join(generators)} of weight {weight} that "
                    "chance would not give as well"
                )
            found.append(fit)
        constants.append(tuple(fit.constant for fit in found))
        fits.append(tuple(found))
    return tuple(constants), tuple(fits)
