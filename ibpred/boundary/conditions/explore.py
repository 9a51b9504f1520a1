"""Walk the corners and edges of the Euclidean region and bring all conditions to one corner."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

from ibpred.boundary.behaviour.regions import ParametricFamily
from ibpred.boundary.conditions.conditions import (
    EdgeView,
    are_regular,
    conditions_at,
    view_from,
)
from ibpred.boundary.conditions.edges import Corner, Edge, edges_at
from ibpred.boundary.conditions.far_side import half_turn, reflected_view
from ibpred.boundary.conditions.linear import Transported, transported
from ibpred.boundary.conditions.sources import Master, keeps_root
from ibpred.epsform.form import EpsilonForm
from ibpred.errors import BoundaryError
from ibpred.iterated.constants.generators import NAMES
from ibpred.iterated.constants.matrices import MatrixSeries, identity
from ibpred.iterated.constants.zeta import LONGEST_ALTERNATING, LONGEST_PLAIN
from ibpred.iterated.transport import INFINITY, Infinity, Point, connection
from ibpred.progress import SILENT, Progress


@dataclass(frozen=True)
class BoundaryProblem:
    """What the boundary constants are computed from.

    Attributes
    ----------
    form
        An epsilon-form in ratios that are positive in the Euclidean region.
    masters
        What is known of each master, in the order of the form.
    family
        U and F in the ratios; None where no behaviour shall be read off them.
    corner
        The corner at which the constants are wanted.
    loops
        L: an integral that is not known in closed form has poles of order at most 2 L in eps.
    weight
        Constants are wanted through ``eps^weight`` of the canonical functions.
    start
        All canonical functions are known to vanish before this power of eps; None where nothing is known.
    real
        Whether the functions are real for small positive ratios, as in the Euclidean region.
    """

    form: EpsilonForm
    masters: tuple[Master, ...]
    family: ParametricFamily | None
    corner: Corner
    loops: int
    weight: int
    start: int | None = None
    real: bool = True

    @property
    def heaviness(self) -> int:
        """Weight by which constants may exceed their order: that of factors ``Gamma(1/2)``."""
        return max((m.closed.heaviness for m in self.masters if m.closed is not None), default=0)


@dataclass(frozen=True)
class Gathered:
    """Conditions brought to the corner of the problem, and the reasons why others are not usable."""

    conditions: tuple[Transported, ...]
    unused: tuple[str, ...]


def unit_transport(size: int, order: int) -> MatrixSeries:
    """The transport from a corner to itself, through ``eps^order``."""
    return MatrixSeries(({(0,) * len(NAMES): identity(size)}, *({} for _ in range(order))))


def explore(
    problem: BoundaryProblem, last: int, order: int, progress: Progress = SILENT
) -> Iterator[Gathered]:
    """Conditions on the vector at the problem's corner, more of them at each step.

    Parameters
    ----------
    problem
        The problem.
    last
        Highest power of eps of the values.
    order
        Transports are taken through ``eps^order``.
    progress
        Told about the conditions found, edge by edge and point by point.

    Yields
    ------
    Gathered
        After each corner visited: all conditions so far.
    """
    start = MatrixSeries(({(0,) * len(NAMES): identity(len(problem.masters))}, *({} for _ in range(order))))
    reached: dict[Corner, MatrixSeries] = {problem.corner: start}
    queue = [problem.corner]
    conditions: list[Transported] = []
    unused: list[str] = []
    for corner in queue:
        here = reached[corner]
        for k, edge in enumerate(edges_at(problem.form, corner)):
            view = view_from(edge, problem.form, problem.masters, problem.family)
            if k == 0:
                conditions += [transported(c, here) for c in conditions_at(view, Fraction(0), last)]
            if edge.end in reached:
                continue
            end = _walk(view, here, last, order, conditions, unused, progress)
            if edge.end is not None and end is not None:
                reached[edge.end] = end
                queue.append(edge.end)
        if not problem.real and len(corner) == 1:
            conditions += _far_side(problem, last, order, unused)
        yield Gathered(tuple(conditions), tuple(unused))


def _far_side(problem: BoundaryProblem, last: int, order: int, unused: list[str]) -> list[Transported]:
    """Conditions at minus infinity, where nothing lies in between."""
    view = reflected_view(problem.form, problem.masters)
    residues = view.edge.residues
    found = conditions_at(view, INFINITY, last)
    if not found or view.edge.nonlinear or any(a > 0 and residues[a] for a in residues):
        return []
    try:
        transport = _connection(view.edge, INFINITY, order, ()) @ half_turn(view, order)
    except BoundaryError as error:
        unused.append(str(error))
        return []
    return [transported(condition, transport) for condition in found]


def _walk(
    view: EdgeView,
    here: MatrixSeries,
    last: int,
    order: int,
    conditions: list[Transported],
    unused: list[str],
    progress: Progress,
) -> MatrixSeries | None:
    """Collect the conditions along one edge; the transport to its end, where the way is free."""
    edge = view.edge
    if edge.nonlinear:
        unused.append(
            f"points other than {edge.point_text(Fraction(0))}: the letters {', '.join(edge.nonlinear)} that "
            "are not linear lie in between"
        )
        return None
    # beyond a zero of a radicand the roots of the other corner are not those of this one
    keeps = all(keeps_root(radicand, edge.approach(INFINITY)) for radicand in edge.radicands)
    leads_on = edge.end is not None and keeps
    positive: list[Point] = [*sorted(a for a in edge.residues if a > 0), INFINITY]
    negative: list[Point] = [*sorted((a for a in edge.residues if a < 0), reverse=True)]
    end: MatrixSeries | None = None
    for direction in (positive, negative):
        passed: list[Fraction] = []
        for point in direction:
            progress.advance(len(conditions), None)
            found = conditions_at(view, point, last)
            needed = bool(found) or (isinstance(point, Infinity) and leads_on)
            if needed:
                try:
                    transport = _connection(edge, point, order, passed) @ here
                except BoundaryError as error:
                    unused.append(str(error))
                    transport = None
                if transport is not None:
                    conditions += [transported(condition, transport) for condition in found]
                    if isinstance(point, Infinity) and leads_on:
                        end = transport
            if isinstance(point, Infinity):
                continue
            if not are_regular(found, edge.residues[point]):
                if point != direction[-1]:
                    unused.append(
                        f"points beyond {edge.point_text(point)}, where the solution is not known to be "
                        "regular"
                    )
                break
            if edge.residues[point]:
                passed.append(point)
    return end


def _connection(edge: Edge, point: Point, order: int, passed: Sequence[Fraction]) -> MatrixSeries:
    """The transport as far as its constants are known; high orders only sharpen the conditions."""
    residues: Any = edge.residues
    if order > LONGEST_ALTERNATING:
        try:
            return connection(residues, point, min(order, LONGEST_PLAIN), passed)
        except BoundaryError:
            # alternating sums are known to a lower weight; anything else fails again below
            return connection(residues, point, LONGEST_ALTERNATING, passed)
    return connection(residues, point, order, passed)
