"""Numbers by whatever route there is; each value says which one it took."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import TYPE_CHECKING

from ibpred.family.definition import Powers
from ibpred.numerics.value import Value
from ibpred.reduction.wanted import check_powers
from ibpred.run.form_values import form_values

if TYPE_CHECKING:
    from ibpred.run.chain import Chain


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
        If a point is incomplete or singular.
    UnfinishedError
        If the family is not solved, or the digits cannot be reached.
    """
    for powers in wanted:
        check_powers(chain.definition, powers)
    return form_values(chain, points, wanted, order, digits)
