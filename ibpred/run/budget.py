"""Time allowed for a command: the deadline, and what is told when it comes."""

from __future__ import annotations

import time
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, replace

from ibpred.boundary.edges import Corner
from ibpred.boundary.fix import Boundary
from ibpred.errors import OutOfTimeError, UnfinishedError
from ibpred.iterated.solution import Solution
from ibpred.progress import Expired, never
from ibpred.run.chain import Chain
from ibpred.run.stages import Stages


def deadline(seconds: float | None) -> Expired:
    """A deadline so many seconds from now; None for none."""
    if seconds is None:
        return never
    end = time.monotonic() + seconds
    return lambda: time.monotonic() > end


@contextmanager
def told(stages: Stages) -> Iterator[None]:
    """What stops for want of time inside says what is kept, and how to go on."""
    try:
        yield
    except OutOfTimeError as over:
        parts = [over.statement] if over.statement else []
        raise OutOfTimeError(over.during, " ".join([*parts, standing(stages)])) from None


def standing(stages: Stages) -> str:
    """What is finished, what is kept of the rest, and how to go on, in whole sentences."""
    finished = ", ".join(dict.fromkeys(stages.finished)) or "nothing yet"
    text = f"Finished and kept in {stages.store.folder}: {finished}."
    work = stages.store.work()
    if work:
        listed = ", ".join(f"{count} x {kind}" for kind, count in work.items())
        text += f" Kept of what was being done: {listed}."
    else:
        text += " What was being done begins anew."
    return f"{text} The same command goes on from there; give it more time (--seconds), or leave that out."


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
        As `ibpred.run.chain.Chain.solution`.
    """
    if chain.expired is never:
        return Solved(chain.completed_boundary(highest, corner), chain.solution(highest, corner), None)
    reached: Solved | None = None
    for order in range(min(highest, chain.order_of_weight(0)), highest + 1):
        try:
            reached = Solved(chain.completed_boundary(order, corner), chain.solution(order, corner), None)
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
