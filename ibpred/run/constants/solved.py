"""All boundary constants of a family, the fitted ones too, and the solution with them."""

from __future__ import annotations

from dataclasses import dataclass, replace

from ibpred.boundary.conditions.edges import Corner
from ibpred.boundary.conditions.fix import Boundary
from ibpred.errors import BoundaryError, OutOfTimeError, UnfinishedError
from ibpred.exact.codec import to_data
from ibpred.iterated.solution import Solution, constant_solution, solve_orders
from ibpred.numerics.forms.channels import Channel
from ibpred.progress import never
from ibpred.run.chain.chain import Chain
from ibpred.run.constants.fitted import completed_by_fits, one_scale_boundary
from ibpred.run.constants.regions import channel_boundary


def completed_boundary(chain: Chain, weight: int, corner: Corner = ()) -> Boundary:
    """As `Chain.boundary`; what stays open there is recognised from values and marked as fitted.

    Raises
    ------
    UnfinishedError
        If the family has no epsilon-form, or constants stay open all the same.
    """

    def compute() -> Boundary:
        form = chain.solved_form()
        if form.variables:
            return completed_by_fits(chain, chain.boundary_problem(form, weight, corner), caught)
        return one_scale_boundary(chain, weight)

    try:
        return chain.boundary(weight, corner)
    except BoundaryError as error:
        caught = error
    kept_as = [weight, *corner] if corner else weight
    return chain.kept("boundary with fits", Boundary, kept_as, compute)


def boundary_in(chain: Chain, channel: Channel, weight: int) -> Boundary:
    """Boundary constants of a region of a family without a Euclidean region; see `completed_boundary`."""
    if channel.is_base():
        return completed_boundary(chain, weight)
    problem = chain.boundary_problem(chain.solved_form(), weight)
    return chain.kept(
        "boundary of a region",
        Boundary,
        [weight, to_data(channel)],
        lambda: channel_boundary(chain, problem, channel),
    )


def solution(chain: Chain, weight: int, corner: Corner = ()) -> Solution:
    """The canonical functions in iterated integrals through ``eps^weight``; see `completed_boundary`."""
    form, boundary = chain.solved_form(), completed_boundary(chain, weight, corner)
    chain.progress.stage("iterated integrals")
    if form.variables:
        return solve_orders(form, boundary.corner, boundary.constants, weight, boundary.start)
    return constant_solution(boundary.constants, boundary.start)


@dataclass(frozen=True)
class Solved:
    """The solution as far as it was reached.

    Attributes
    ----------
    boundary, solution
        Constants and functions through the order reached.
    stopped
        Why it does not go further; None where it is all that was asked for.
    """

    boundary: Boundary
    solution: Solution
    stopped: OutOfTimeError | None


def solved_in_time(chain: Chain, highest: int, corner: Corner = ()) -> Solved:
    """The solution through ``eps^highest``, or through the last order that was reached in time.

    With a deadline the orders are taken one after the other, so that there is something to return.

    Parameters
    ----------
    chain
        The family's chain.
    highest
        Order wanted.
    corner
        The ratios, the smallest first; empty for the usual corner.

    Raises
    ------
    OutOfTimeError
        If no order was reached.
    UnfinishedError
        As `solution`.
    """
    if chain.expired is never:
        return Solved(completed_boundary(chain, highest, corner), solution(chain, highest, corner), None)
    reached: Solved | None = None
    for order in range(min(highest, chain.order_of_weight(0)), highest + 1):
        try:
            reached = Solved(completed_boundary(chain, order, corner), solution(chain, order, corner), None)
        except OutOfTimeError as over:
            if reached is None:
                raise
            told_ = f"Done through eps^{order - 1} of eps^{highest}."
            return replace(reached, stopped=OutOfTimeError(over.during, told_))
        except UnfinishedError:
            # the conditions at a low order may not suffice where those at a higher one do
            if order == highest:
                raise
    assert reached is not None
    return reached
