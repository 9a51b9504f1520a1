"""Boundary constants from all conditions at once: one linear system over Q, solved exactly.

The vector at a corner is ``c = sum_k eps^k c^(k)``, each c^(k) an unknown rational combination of monomials
in the constants of weight at most k (counted from the row's first order), real in a Euclidean region, with
``i pi`` among them outside it. Conditions at other points are transported to the corner and compared monomial
by monomial, real and imaginary parts apart. Conditions that follow from the others are kept as evidence: they
could have failed.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import flint

from ibpred.boundary.conditions.conditions import Condition
from ibpred.boundary.conditions.explore import BoundaryProblem, Gathered, explore, unit_transport
from ibpred.boundary.conditions.linear import Outcome, Transported, solve_all, transported
from ibpred.boundary.recognise import Fit
from ibpred.errors import BoundaryError, InputError
from ibpred.iterated.constants.constants import Constant
from ibpred.iterated.constants.series import Series, eps_valuation
from ibpred.progress import SILENT, Progress

_MOST_EXTRA_ORDERS = 3
_LEAST_CORNERS = 2  # where there are more: the second one confirms the first


@dataclass(frozen=True)
class Evidence:
    """How one condition took part.

    Attributes
    ----------
    condition
        What it says.
    equations
        Rational equations it gave.
    independent
        How many of them told something new.
    confirming
        How many followed from the conditions before, and so confirmed them.
    """

    condition: str
    equations: int
    independent: int
    confirming: int


@dataclass(frozen=True)
class Fitted:
    """A boundary constant that was recognised from its value, not derived.

    Attributes
    ----------
    row, order
        Canonical function and power of eps.
    fit
        The constant, the digits that support it, the odds of a chance hit.
    """

    row: int
    order: int
    fit: Fit


@dataclass(frozen=True)
class Boundary:
    """Boundary constants at a corner ``x1 << x2 << ... -> 0+``: ``f ~ prod_i x_i^(eps A_i) c(eps)``.

    Attributes
    ----------
    start
        Power of eps of the first vector.
    constants
        ``constants[k][i]``: coefficient of ``eps^(start + k)`` for canonical function i.
    evidence
        The conditions used, in the order of use.
    unused
        Points whose conditions could not be used, with the reason.
    corner
        The ratios, the smallest first; empty for a family without a ratio.
    fitted
        The constants that rest on a fit; all others are derived, from these too.
    """

    start: int
    constants: tuple[tuple[Constant, ...], ...]
    evidence: tuple[Evidence, ...]
    unused: tuple[str, ...]
    corner: tuple[str, ...] = ()
    fitted: tuple[Fitted, ...] = ()


class OpenConstantsError(BoundaryError):
    """The conditions leave constants open.

    Parameters
    ----------
    problem
        The message.
    open_
        Pairs (power of eps, canonical function).
    known
        The constants that are determined, likewise; those before the first vanish.
    """

    def __init__(
        self, problem: str, open_: tuple[tuple[int, int], ...], known: Mapping[tuple[int, int], Constant]
    ) -> None:
        self.open = open_
        self.known = known
        super().__init__(problem)


def fix_constants(
    problem: BoundaryProblem, fitted: Sequence[Fitted] = (), progress: Progress = SILENT
) -> Boundary:
    """Determine the boundary constants exactly.

    Parameters
    ----------
    problem
        The epsilon-form and what is known of its masters.
    fitted
        Constants at the problem's corner that come from values; everything that follows from the
        conditions is derived all the same, and a fit that contradicts them is an error.
    progress
        Told about the conditions found.

    Raises
    ------
    InputError
        If the form has no ratio, or the number of masters or the corner does not fit.
    OpenConstantsError
        If constants stay undetermined (names rows and orders).
    BoundaryError
        If conditions contradict each other (names the first that does).
    """
    outcome, gathered, weight = _determine(problem, fitted, progress)
    starts = lowest_orders(problem)
    first = min(starts)
    if outcome.open:
        pairs = ((order, row) for order in range(first, weight + 1) for row in range(len(starts)))
        known = {pair: outcome.constant(*pair) for pair in pairs if pair not in outcome.open}
        raise OpenConstantsError(_complaint(problem, outcome, gathered.unused), outcome.open, known)
    evidence = tuple(
        Evidence(item.condition.name, total, new, total - new)
        for item, (total, new) in zip(gathered.conditions, outcome.counts, strict=True)
    )
    vectors = [
        tuple(outcome.constant(order, row) for row in range(len(starts)))
        for order in range(first, weight + 1)
    ]
    while len(vectors) > 1 and not any(vectors[0]):
        del vectors[0]
        first += 1
    return Boundary(first, tuple(vectors), evidence, gathered.unused, problem.corner, tuple(fitted))


def _determine(
    problem: BoundaryProblem, fitted: Sequence[Fitted], progress: Progress
) -> tuple[Outcome, Gathered, int]:
    """The outcome of all conditions, the conditions, and the order through which constants are given."""
    form = problem.form
    if not form.variables:
        raise InputError("a form without ratios has no boundary to fix constants from")
    if sorted(problem.corner) != sorted(form.variables):
        raise InputError(
            f"the corner {' << '.join(problem.corner)} does not name the ratios {', '.join(form.variables)}"
        )
    if len(problem.masters) != len(form.inverse):
        raise InputError(f"{len(problem.masters)} masters are given for {len(form.inverse)} functions")
    starts = lowest_orders(problem)
    weight = max(problem.weight, min(starts))
    extra = 0
    while True:
        # conditions at one order often fix constants of the order before only
        outcome, gathered = _solve(problem, fitted, starts, weight, weight + extra, progress)
        if not outcome.open or extra == _MOST_EXTRA_ORDERS:
            return outcome, gathered, weight
        extra += 1


def lowest_orders(problem: BoundaryProblem) -> tuple[int, ...]:
    """Orders k with ``weight <= order - k`` for each canonical function, which begin there or later."""
    poles = []
    for master in problem.masters:
        poles.append(-2 * problem.loops if master.closed is None else eps_valuation(master.closed.rational))
    bounds = [
        min(eps_valuation(entry) + poles[j] for j, entry in enumerate(row) if entry)
        for row in problem.form.inverse
    ]
    least = min(bounds) if problem.start is None else problem.start
    return tuple(max(bound, least) - problem.heaviness for bound in bounds)


def _solve(
    problem: BoundaryProblem,
    fitted: Sequence[Fitted],
    starts: Sequence[int],
    weight: int,
    last: int,
    progress: Progress,
) -> tuple[Outcome, Gathered]:
    """Visit corners until the constants are determined and confirmed, or no corner is left."""
    outcome = Outcome({}, (), ())
    gathered = Gathered((), ())
    # fits come last: what follows without them does not rest on them
    extra = _as_conditions(fitted, len(problem.masters), last - min(starts))
    for count, gathered in enumerate(explore(problem, last, last - min(starts), progress), start=1):
        gathered = Gathered((*gathered.conditions, *extra), gathered.unused)
        outcome = solve_all(gathered.conditions, starts, weight, last, problem.real, progress)
        if not outcome.open and count >= _LEAST_CORNERS:
            break
    return outcome, gathered


def _as_conditions(fitted: Sequence[Fitted], size: int, order: int) -> list[Transported]:
    found = []
    for item in fitted:
        if not 0 <= item.row < size:
            raise InputError(f"a fit names canonical function {item.row + 1}, but there are {size}")
        row = flint.fmpq_mat(1, size, [int(k == item.row) for k in range(size)])
        name = f"fit of canonical function {item.row + 1} at eps^{item.order} ({item.fit.digits} digits)"
        value = Series(item.order, (item.fit.constant,))
        found.append(transported(Condition(name, row, (value,), item.order), unit_transport(size, order)))
    return found


def _complaint(problem: BoundaryProblem, outcome: Outcome, unused: Sequence[str]) -> str:
    rows: dict[int, list[int]] = {}
    for order, row in outcome.open:
        rows.setdefault(row, []).append(order)
    listed = "; ".join(
        f"canonical function {row + 1} ({problem.masters[row].label}) at eps^"
        + ", eps^".join(str(order) for order in sorted(set(orders)))
        for row, orders in sorted(rows.items())
    )
    text = f"boundary constants stay undetermined: {listed}"
    if unused:
        text += ". Conditions that could not be used: " + "; ".join(unused)
    return text
