"""Boundary constants from all conditions at once: one linear system over Q, solved exactly.

The vector at x = 0 is ``c = sum_k eps^k c^(k)``, each c^(k) an unknown rational combination of monomials in
the real constants of weight at most k (counted from the row's first order). Conditions at other points
are transported to x = 0 and compared monomial by monomial, real and imaginary parts apart. Conditions that
follow from the others are kept as evidence: they could have failed.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

from ibpred.boundary.conditions import Master, conditions_at
from ibpred.boundary.linear import Transported, Undetermined, solve_all, transported
from ibpred.epsform.form import EpsilonForm
from ibpred.errors import BoundaryError, InputError
from ibpred.iterated.constants import NAMES, Constant
from ibpred.iterated.matrices import MatrixSeries, identity, rational_matrix
from ibpred.iterated.series import eps_valuation
from ibpred.iterated.solution import letter_roots
from ibpred.iterated.transport import INFINITY, Point, Residues, connection, residue_at
from ibpred.iterated.zeta import LONGEST_ALTERNATING, LONGEST_PLAIN

_MOST_EXTRA_ORDERS = 3


@dataclass(frozen=True)
class BoundaryProblem:
    """What the boundary constants are computed from.

    Attributes
    ----------
    form
        An epsilon-form in one ratio that is positive in the Euclidean region.
    masters
        What is known of each master, in the order of the form.
    loops
        L: an integral that is not known in closed form has poles of order at most 2 L in eps.
    weight
        Constants are wanted through ``eps^weight`` of the canonical functions.
    """

    form: EpsilonForm
    masters: tuple[Master, ...]
    loops: int
    weight: int


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
    """Boundary constants at x -> 0+ with tangent vector 1: ``f ~ x^(eps A_0) c(eps)``.

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
    """

    start: int
    constants: tuple[tuple[Constant, ...], ...]
    evidence: tuple[Evidence, ...]
    unused: tuple[str, ...]


def fix_constants(problem: BoundaryProblem) -> Boundary:
    """Determine the boundary constants exactly.

    Parameters
    ----------
    problem
        The epsilon-form and what is known of its masters.

    Raises
    ------
    InputError
        If the form has several ratios or square roots, or the number of masters does not fit.
    BoundaryError
        If constants stay undetermined (names rows and orders), or conditions contradict each other
        (names the first that does).
    """
    form = problem.form
    if len(form.variables) != 1 or any(form.tags):
        raise InputError("boundary constants are determined here for one ratio and no square roots")
    if len(problem.masters) != len(form.inverse):
        raise InputError(f"{len(problem.masters)} masters are given for {len(form.inverse)} functions")
    starts = _starts(problem)
    first = min(starts)
    weight = max(problem.weight, first)
    extra = 0
    while True:
        # conditions at one order often fix constants of the order before only
        system, unused = _gather(problem, weight + extra, weight + extra - first)
        outcome = solve_all(system, starts, weight, weight + extra)
        if not isinstance(outcome, Undetermined):
            break
        extra += 1
        if extra > _MOST_EXTRA_ORDERS:
            raise BoundaryError(_complaint(problem, outcome, unused))
    evidence = tuple(
        Evidence(item.condition.name, total, new, total - new)
        for item, (total, new) in zip(system, outcome.counts, strict=True)
    )
    vectors = [
        tuple(outcome.constant(order, row) for row in range(len(starts)))
        for order in range(first, weight + 1)
    ]
    while len(vectors) > 1 and not any(vectors[0]):
        del vectors[0]
        first += 1
    return Boundary(first, tuple(vectors), evidence, unused)


def _starts(problem: BoundaryProblem) -> tuple[int, ...]:
    """A lower bound of the first order of each canonical function."""
    poles = []
    for master in problem.masters:
        poles.append(-2 * problem.loops if master.closed is None else eps_valuation(master.closed.rational))
    return tuple(
        min(eps_valuation(entry) + poles[j] for j, entry in enumerate(row) if entry)
        for row in problem.form.inverse
    )


def _gather(
    problem: BoundaryProblem, last: int, order: int
) -> tuple[tuple[Transported, ...], tuple[str, ...]]:
    """All usable conditions, brought to x = 0, and the reasons why others are not usable."""
    form = problem.form
    residues: dict[Fraction, Any] = {}
    for root, matrix in zip(letter_roots(form.letters, form.variables[0]), form.matrices, strict=True):
        if root is not None:
            residues[root] = rational_matrix(matrix)
    if not residues:
        raise InputError("the epsilon-form has no letter that is linear in the ratio")
    points: list[Point] = [Fraction(0)]
    unused: list[str] = []
    if len(residues) == len(form.letters):
        points += [*sorted((a for a in residues if a), key=lambda a: (abs(a), a)), INFINITY]
    else:
        unused.append("points other than x = 0: letters that are not linear in the ratio lie in between")
    found: list[Transported] = []
    for point in points:
        conditions = conditions_at(form, problem.masters, residue_at(residues, point), point, last)
        if not conditions:
            continue
        if point == 0:
            found += [transported(c, _no_transport(len(form.inverse), order)) for c in conditions]
            continue
        try:
            transport = _connection(residues, point, order)
        except BoundaryError as error:
            unused.append(str(error))
            continue
        found += [transported(condition, transport) for condition in conditions]
    return tuple(found), tuple(unused)


def _no_transport(size: int, order: int) -> MatrixSeries:
    return MatrixSeries(({(0,) * len(NAMES): identity(size)}, *({} for _ in range(order))))


def _connection(residues: Residues, point: Point, order: int) -> MatrixSeries:
    """The transport as far as its constants are known; high orders only sharpen the conditions."""
    if order > LONGEST_ALTERNATING:
        try:
            return connection(residues, point, min(order, LONGEST_PLAIN))
        except BoundaryError:
            # alternating sums are known to a lower weight; anything else fails again below
            return connection(residues, point, LONGEST_ALTERNATING)
    return connection(residues, point, order)


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
