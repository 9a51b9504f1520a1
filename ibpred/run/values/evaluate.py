"""Numbers by whatever route there is; each value says which one it took."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction

from ibpred.errors import PrecisionError, UnfinishedError
from ibpred.family.definition import Powers
from ibpred.numerics.value import Value
from ibpred.reduction.wanted import check_powers
from ibpred.run.chain.chain import Chain
from ibpred.run.values.continued_values import continued_values
from ibpred.run.values.form_values import form_values
from ibpred.run.values.limits import is_singular, limit_values


def evaluate(
    chain: Chain, point: Mapping[str, Fraction], wanted: Sequence[Powers], order: int, digits: int
) -> tuple[Value, ...]:
    """Values at a point; see `evaluate_points`."""
    return evaluate_points(chain, (point,), wanted, order, digits)[0]


def evaluate_points(
    chain: Chain,
    points: Sequence[Mapping[str, Fraction]],
    wanted: Sequence[Powers],
    order: int,
    digits: int,
) -> tuple[tuple[Value, ...], ...]:
    """Values at points, of the masters or of given integrals.

    The first of these routes that is open is taken, and every value says which one it was: the epsilon-form
    solved with exact constants (rigorous balls); continuation by the differential system from a point where
    the masters are known; the auxiliary mass at the point itself (both with estimated errors). At points on
    singularities the values are the limits of the expansions there.

    Parameters
    ----------
    chain
        The family's chain; it is solved as far as needed.
    points
        Exact values of all invariants.
    wanted
        Integrals; the masters where none is given.
    order
        Highest power of eps.
    digits
        Digits wanted of every coefficient.

    Returns
    -------
    For every point one value an integral, in order.

    Raises
    ------
    PointError
        If a point is incomplete, or an integral has no limit at a singular one.
    UnfinishedError
        If no route is open, or the digits cannot be reached.
    """
    for powers in wanted:
        check_powers(chain.definition, powers)
    singular = [is_singular(chain, point) for point in points]
    regular = [point for point, on in zip(points, singular, strict=True) if not on]
    found = iter(_regular_values(chain, regular, wanted, order, digits) if regular else ())
    return tuple(
        limit_values(chain, point, wanted, order, digits) if on else next(found)
        for point, on in zip(points, singular, strict=True)
    )


def _regular_values(
    chain: Chain, points: Sequence[Mapping[str, Fraction]], wanted: Sequence[Powers], order: int, digits: int
) -> tuple[tuple[Value, ...], ...]:
    try:
        return form_values(chain, points, wanted, order, digits)
    except PrecisionError:
        raise
    except UnfinishedError as error:
        chain.progress.stage(f"no values from an epsilon-form ({error})")
        unsolved = error
    try:
        return continued_values(chain, points, wanted, order, digits)
    except PrecisionError:
        raise
    except UnfinishedError as error:
        raise UnfinishedError(
            f"no route to values is open: from an epsilon-form: {unsolved}; by the auxiliary mass: {error}"
        ) from error
