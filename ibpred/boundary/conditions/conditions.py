"""Linear conditions on boundary vectors: known functions, forbidden exponents, regular points.

Near a point of an edge, ``f = (1 + ...) prod_i u_i^(eps A_i) c`` with c the boundary vector there, u_i the
scales of the edge and the distance to the point. The part of row i in a joint generalised eigenspace
(lambda_i) is the coefficient of ``prod_i u_i^(lambda_i eps)`` (with powers of log u_i), at u^0. It comes
from the masters in that row of ``f = T^-1 I``, so it is absent unless one of them has exponents n_i +
lambda_i eps with n plus the order of the entry of T^-1 at most zero.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from typing import Any

import flint

from ibpred.boundary.behaviour.regions import ParametricFamily
from ibpred.boundary.conditions.combinations import Combination, vanishing_combinations
from ibpred.boundary.conditions.edges import Edge
from ibpred.boundary.conditions.eigen import JointSpace, joint_spaces
from ibpred.boundary.conditions.local import Contribution, class_sum
from ibpred.boundary.conditions.sources import Master, Slopes, Sources, known_at, sources
from ibpred.epsform.form import EpsilonForm
from ibpred.errors import BoundaryError
from ibpred.exact.rational import Rational
from ibpred.iterated.constants.series import Series
from ibpred.iterated.transport import Point, residue_at


@dataclass(frozen=True)
class Condition:
    """``rows @ c_point = values`` for the boundary vector at a point.

    Attributes
    ----------
    name
        What it says, for evidence and messages.
    rows
        m x n `flint.fmpq_mat`, free of eps.
    values
        One series in eps for each row; None for zero.
    only
        The power of eps at which alone it holds; None for all.
    """

    name: str
    rows: Any
    values: tuple[Series | None, ...]
    only: int | None = None


@dataclass(frozen=True)
class EdgeView:
    """The epsilon-form and what is known of its masters, seen from one edge.

    Attributes
    ----------
    edge
        The edge.
    inverse
        T^-1 in terms of scales and variable.
    tags
        For each function the radicands whose product's root multiplies its row.
    masters
        With closed forms in terms of scales and variable.
    family
        U and F likewise; None where no behaviour is to be read off.
    """

    edge: Edge
    inverse: tuple[tuple[Rational, ...], ...]
    tags: tuple[tuple[Rational, ...], ...]
    masters: tuple[Master, ...]
    family: ParametricFamily | None

    @cached_property
    def names(self) -> tuple[str, ...]:
        """Scales and variable."""
        return (*self.edge.scales, self.edge.variable)


def view_from(
    edge: Edge, form: EpsilonForm, masters: Sequence[Master], family: ParametricFamily | None
) -> EdgeView:
    """Restrict a problem to an edge."""
    moved = {name: v for name, v in edge.values.items() if v != form.ring.variable(name)}
    tags = tuple(tuple(edge.radicands[k] for k in tag) for tag in form.tags)
    if not moved:
        return EdgeView(edge, form.inverse, tags, tuple(masters), family)
    inverse = tuple(tuple(entry.substitute(moved) for entry in row) for row in form.inverse)
    seen = tuple(
        Master(m.label, None if m.closed is None else m.closed.substituted(moved), m.powers) for m in masters
    )
    return EdgeView(edge, inverse, tags, seen, None if family is None else family.substituted(moved))


def conditions_at(view: EdgeView, point: Point, order: int) -> tuple[Condition, ...]:
    """All conditions at one point of an edge.

    Parameters
    ----------
    view
        The problem on the edge.
    point
        The point; at negative ones closed forms that change along the edge are used with their exponents
        only.
    order
        Values are given through ``eps^order``.

    Raises
    ------
    BoundaryError
        If a closed form contradicts the differential equation at the point, or the residues do not
        commute.
    """
    edge = view.edge
    spaces = joint_spaces([*edge.scale_residues, residue_at(edge.residues, point)])
    size = len(view.masters)
    approach = edge.approach(point)
    known = [known_at(master, view.family, approach) for master in view.masters]
    gathered: dict[str, list[_Row]] = {}
    for i in range(size):
        made_of = sources(known, view.inverse[i], view.tags[i], approach)
        if made_of is None:
            continue
        if not made_of.parts:
            _check_poles(made_of.values, order, view, i, point)
        _check_classes(made_of, spaces, order, view, i, point)
        unit = tuple(Fraction(int(j == i)) for j in range(size))
        for space in spaces:
            for name, row in _row_conditions(made_of, space, unit, view, point, order):
                gathered.setdefault(name, []).append(row)
    if not edge.scales:
        for tag, vector in _vanishing(view, point):
            made_of = sources(known, _combined(vector, view.inverse), tag, approach)
            if made_of is None:
                continue
            for space in spaces:
                for name, row in _row_conditions(made_of, space, vector, view, point, order):
                    gathered.setdefault(name, []).append(row)
    found = []
    for name, rows in gathered.items():
        matrix = flint.fmpq_mat(len(rows), size, [entry for row, _ in rows for entry in row])
        found.append(Condition(name, matrix, tuple(value for _, value in rows)))
    # values first: later conditions are then seen to confirm or to contradict them
    return tuple(sorted(found, key=lambda c: (all(v is None for v in c.values), c.name)))


def are_regular(conditions: Sequence[Condition], residue: Any) -> bool:
    """Whether conditions at a point imply that its residue annihilates the boundary vector there."""
    size = residue.ncols()
    rows: list[list[Any]] = []
    for condition in conditions:
        for r, value in enumerate(condition.values):
            if value is None:
                rows.append([condition.rows[r, c] for c in range(size)])
    wanted = [[residue[r, c] for c in range(size)] for r in range(residue.nrows())]
    if not rows:
        return not residue
    known = flint.fmpq_mat(len(rows), size, [v for row in rows for v in row])
    both = flint.fmpq_mat(len(rows) + len(wanted), size, [v for row in (*rows, *wanted) for v in row])
    return int(known.rref()[1]) == int(both.rref()[1])


def _vanishing(view: EdgeView, point: Point) -> Iterator[tuple[tuple[Rational, ...], Combination]]:
    """Combinations of functions with the same root in which the coefficients of the masters vanish."""
    size = len(view.inverse)
    for tag in dict.fromkeys(view.tags):
        rows = [i for i in range(size) if view.tags[i] == tag]
        for vector in vanishing_combinations([view.inverse[i] for i in rows], view.edge.variable, point):
            factors = dict(zip(rows, vector, strict=True))
            yield tag, tuple(factors.get(i, Fraction(0)) for i in range(size))


_Row = tuple[Sequence[Any], Series | None]


def _combined(vector: Combination, rows: Sequence[Sequence[Rational]]) -> tuple[Rational, ...]:
    """The combination of rows."""
    total = tuple(entry * 0 for entry in rows[0])
    for factor, row in zip(vector, rows, strict=True):
        if factor:
            total = tuple(a + b * factor for a, b in zip(total, row, strict=True))
    return total


def _row_conditions(
    made_of: Sources, space: JointSpace, vector: Combination, view: EdgeView, point: Point, order: int
) -> Iterator[tuple[str, _Row]]:
    """Conditions on one function, or a combination, in one joint generalised eigenspace."""
    allowed = made_of.allowed(space.values)
    logarithmic = {i for exponent in allowed for i, logs in enumerate(exponent.logs) if logs}
    size = space.projector.ncols()
    left = flint.fmpq_mat(1, size, [flint.fmpq(v.numerator, v.denominator) for v in vector])
    zero = (0,) * len(space.values)
    entries = (left * space.projector).entries()
    more = made_of.leading_values(space.values) if any(entries) or not allowed else None
    series = None
    if more is not None and any(v.slopes == space.values for v in (*made_of.values, *more)):
        series = class_sum((*made_of.values, *more), _rational(space.values), zero, order)
        if not any(series.coefficients):
            series = None
    where = view.edge.point_text(point)
    if more is not None and (any(entries) or series is not None):
        yield f"{_name(space.values, series, bool(allowed))} at {where}", (entries, series)
    absent = f"no logarithm with exponent {_shown(space.values)}*eps"
    name = f"{absent if allowed else _name(space.values, series, False)} at {where}"
    for factors, matrix in space.nilpotents:
        # a product of nilpotent parts multiplies a product of logarithms of the same quantities
        if factors <= logarithmic:
            continue
        entries = (left * matrix).entries()
        if any(entries):
            yield name, (entries, None)


def _rational(slopes: Slopes) -> tuple[Fraction, ...]:
    return tuple(slope for slope in slopes if slope is not None)


def _shown(slopes: Slopes) -> str:
    return str(slopes[0]) if len(slopes) == 1 else f"({', '.join(map(str, slopes))})"


def _name(slopes: Slopes, series: Series | None, regions: bool) -> str:
    if regions:
        return "Gamma-function values of regions"
    if series is not None:
        return "Gamma-function values"
    if None in slopes:
        return "no irrational exponent"
    return f"no exponent {_shown(slopes)}*eps" if any(slopes) else "vanishing"


def _check_classes(
    made_of: Sources, spaces: Sequence[JointSpace], order: int, view: EdgeView, row: int, point: Point
) -> None:
    """Every class of exponents among the closed forms must be a joint eigenvalue of the residues."""
    eigenvalues = {space.values for space in spaces}
    for slopes in {value.slopes for value in made_of.values} - eigenvalues:
        zero = (0,) * len(slopes)
        if any(class_sum(made_of.values, slopes, zero, order).coefficients) and not made_of.allowed(slopes):
            factors = "*".join(f"{n}^({s}*eps)" for n, s in zip(view.names, slopes, strict=True) if s)
            raise BoundaryError(
                f"the closed forms in canonical function {row + 1} behave like {factors} at "
                f"{view.edge.point_text(point)}, which the differential equation forbids: one of the "
                "two is wrong"
            )


def _check_poles(values: Sequence[Contribution], order: int, view: EdgeView, row: int, point: Point) -> None:
    """A canonical function known in closed form must not have a power-like pole at the point."""
    for slopes, powers in {(value.slopes, value.powers) for value in values}:
        if any(powers) and any(class_sum(values, slopes, powers, order).coefficients):
            pole = "*".join(f"{n}^{p}" for n, p in zip(view.names, powers, strict=True) if p)
            raise BoundaryError(
                f"the closed forms in canonical function {row + 1} ({view.masters[row].label}) have a pole "
                f"{pole} at {view.edge.point_text(point)}, which the epsilon-form forbids: one of the "
                "two is wrong"
            )
