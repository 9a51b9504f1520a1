"""Boundary constants from all conditions at once: one linear system over Q, solved exactly.

The vector at a corner is ``c = sum_k eps^k c^(k)``, each c^(k) an unknown rational combination of monomials
in the real constants of weight at most k (counted from the row's first order). Conditions at other points are
transported to the corner and compared monomial by monomial, real and imaginary parts apart. Conditions that
follow from the others are kept as evidence: they could have failed.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from ibpred.boundary.explore import BoundaryProblem, Gathered, explore
from ibpred.boundary.linear import Determined, Undetermined, solve_all
from ibpred.errors import BoundaryError, InputError
from ibpred.iterated.constants import Constant
from ibpred.iterated.series import eps_valuation

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
    """

    start: int
    constants: tuple[tuple[Constant, ...], ...]
    evidence: tuple[Evidence, ...]
    unused: tuple[str, ...]
    corner: tuple[str, ...] = ()


def fix_constants(problem: BoundaryProblem) -> Boundary:
    """Determine the boundary constants exactly.

    Parameters
    ----------
    problem
        The epsilon-form and what is known of its masters.

    Raises
    ------
    InputError
        If the form has square roots or no ratio, or the number of masters or the corner does not fit.
    BoundaryError
        If constants stay undetermined (names rows and orders), or conditions contradict each other
        (names the first that does).
    """
    form = problem.form
    if not form.variables or any(form.tags):
        raise InputError("boundary constants are determined here for ratios without square roots")
    if sorted(problem.corner) != sorted(form.variables):
        raise InputError(
            f"the corner {' << '.join(problem.corner)} does not name the ratios {', '.join(form.variables)}"
        )
    if len(problem.masters) != len(form.inverse):
        raise InputError(f"{len(problem.masters)} masters are given for {len(form.inverse)} functions")
    starts = _starts(problem)
    first = min(starts)
    weight = max(problem.weight, first)
    extra = 0
    while True:
        # conditions at one order often fix constants of the order before only
        outcome, gathered = _solve(problem, starts, weight, weight + extra)
        if isinstance(outcome, Determined):
            break
        extra += 1
        if extra > _MOST_EXTRA_ORDERS:
            raise BoundaryError(_complaint(problem, outcome, gathered.unused))
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
    return Boundary(first, tuple(vectors), evidence, gathered.unused, problem.corner)


def _starts(problem: BoundaryProblem) -> tuple[int, ...]:
    """A lower bound of the first order of each canonical function."""
    poles = []
    for master in problem.masters:
        poles.append(-2 * problem.loops if master.closed is None else eps_valuation(master.closed.rational))
    return tuple(
        min(eps_valuation(entry) + poles[j] for j, entry in enumerate(row) if entry)
        for row in problem.form.inverse
    )


def _solve(
    problem: BoundaryProblem, starts: Sequence[int], weight: int, last: int
) -> tuple[Determined | Undetermined, Gathered]:
    """Visit corners until the constants are determined and confirmed, or no corner is left."""
    outcome: Determined | Undetermined = Undetermined(())
    gathered = Gathered((), ())
    for count, gathered in enumerate(explore(problem, last, last - min(starts)), start=1):
        outcome = solve_all(gathered.conditions, starts, weight, last)
        if isinstance(outcome, Determined) and count >= _LEAST_CORNERS:
            break
    return outcome, gathered


def _complaint(problem: BoundaryProblem, outcome: Undetermined, unused: Sequence[str]) -> str:
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
