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

from ibpred.boundary.combinations import Combination, vanishing_combinations
from ibpred.boundary.edges import Edge
from ibpred.boundary.eigen import JointSpace, joint_spaces
from ibpred.boundary.expansion import ClosedForm
from ibpred.boundary.local import Contribution, class_sum, contributions
from ibpred.boundary.regions import (
    Behaviour,
    Exponent,
    ParametricFamily,
    behaviour,
    behaviour_of_closed_form,
)
from ibpred.epsform.form import EpsilonForm
from ibpred.errors import BoundaryError
from ibpred.exact.rational import Rational
from ibpred.family.definition import Powers
from ibpred.iterated.series import Series
from ibpred.iterated.transport import Infinity, Point, residue_at


@dataclass(frozen=True)
class Master:
    """What is known of one master integral in the Euclidean region.

    Attributes
    ----------
    label
        Its name, for messages.
    closed
        Its closed form, where there is one.
    powers
        Its powers, from which its behaviour is read off; None where nothing shall be claimed.
    """

    label: str
    closed: ClosedForm | None
    powers: Powers | None


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
    masters
        With closed forms in terms of scales and variable.
    family
        U and F likewise; None where no behaviour is to be read off.
    """

    edge: Edge
    inverse: tuple[tuple[Rational, ...], ...]
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
    if not moved:
        return EdgeView(edge, form.inverse, tuple(masters), family)
    inverse = tuple(tuple(entry.substitute(moved) for entry in row) for row in form.inverse)
    seen = tuple(
        Master(m.label, None if m.closed is None else m.closed.substituted(moved), m.powers) for m in masters
    )
    return EdgeView(edge, inverse, seen, None if family is None else family.substituted(moved))


def conditions_at(view: EdgeView, point: Point, order: int) -> tuple[Condition, ...]:
    """All conditions at one point of an edge.

    Parameters
    ----------
    view
        The problem on the edge.
    point
        The point; closed forms are used with their values at 0 and where they are constant along the edge,
        elsewhere with their exponents.
    order
        Values are given through ``eps^order``.

    Raises
    ------
    BoundaryError
        If a closed form contradicts the differential equation at the corner, or the residues do not
        commute.
    """
    edge = view.edge
    spaces = joint_spaces([*edge.scale_residues, residue_at(edge.residues, point)])
    size = len(view.masters)
    behaviours = [_behaviour(view, master, point) for master in view.masters]
    gathered: dict[str, list[_Row]] = {}
    for i in range(size):
        sources = _sources(view, behaviours, view.inverse[i], point)
        if sources is None:
            continue
        if not sources.unknown:
            _check_poles(sources.values, order, view, i)
        _check_classes(sources, spaces, order, view, i)
        unit = tuple(Fraction(int(j == i)) for j in range(size))
        for space in spaces:
            for name, row in _row_conditions(sources, space, unit, view, point, order):
                gathered.setdefault(name, []).append(row)
    if not edge.scales:
        for vector in vanishing_combinations(view.inverse, edge.variable, point):
            sources = _sources(view, behaviours, _combined(vector, view.inverse), point)
            if sources is None:
                continue
            for space in spaces:
                for name, row in _row_conditions(sources, space, vector, view, point, order):
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


_Row = tuple[Sequence[Any], Series | None]
_Slopes = tuple[Fraction | None, ...]


@dataclass(frozen=True)
class _Sources:
    """What one canonical function is made of: closed forms expanded, and other masters' behaviours."""

    values: tuple[Contribution, ...]
    unknown: tuple[tuple[Behaviour, tuple[int, ...]], ...]  # with the orders of the factor

    def allowed(self, slopes: _Slopes) -> tuple[Exponent, ...]:
        """Behaviours of the masters without values that can show up at u^0 in one class."""
        return tuple(
            exponent
            for behaviour_, shift in self.unknown
            for exponent in behaviour_
            if exponent.slope == slopes and _reaches_zero(exponent.power, shift)
        )


def _reaches_zero(powers: Sequence[Fraction], shift: Sequence[int]) -> bool:
    """Whether powers in integer steps above ``powers + shift`` (lexicographically) can all be zero."""
    for power, more in zip(powers, shift, strict=True):
        if power + more != 0:
            # below a leading term the next powers are not known: anything may happen there
            return power + more < 0
    return True


def _behaviour(view: EdgeView, master: Master, point: Point) -> Behaviour | None:
    approach = view.edge.approach(point)
    if master.closed is not None:
        return behaviour_of_closed_form(master.closed, approach)
    if master.powers is None or view.family is None:
        return None
    return behaviour(view.family, master.powers, approach)


def _combined(vector: Combination, rows: Sequence[Sequence[Rational]]) -> tuple[Rational, ...]:
    """The combination of rows."""
    total = tuple(entry * 0 for entry in rows[0])
    for factor, row in zip(vector, rows, strict=True):
        if factor:
            total = tuple(a + b * factor for a, b in zip(total, row, strict=True))
    return total


def _sources(
    view: EdgeView, behaviours: Sequence[Behaviour | None], entries: Sequence[Rational], point: Point
) -> _Sources | None:
    values: list[Contribution] = []
    unknown: list[tuple[Behaviour, tuple[int, ...]]] = []
    for master, known, entry in zip(view.masters, behaviours, entries, strict=True):
        if not entry:
            continue
        if master.closed is not None and (point == 0 or _is_constant(master.closed, view.edge.variable)):
            values += contributions(_moved(entry, view.edge.variable, point), master.closed, view.names)
            continue
        if known is None:
            return None
        unknown.append((known, view.edge.approach(point).orders(entry)))
    return _Sources(tuple(values), tuple(unknown))


def _is_constant(form: ClosedForm, variable: str) -> bool:
    """Whether a closed form does not change along an edge."""
    return not any(
        variable in v.variables() for v in (form.rational, *(letter for letter, _ in form.letters))
    )


def _moved(value: Rational, variable: str, point: Point) -> Rational:
    """In terms of the distance to a point (the inverse at infinity)."""
    if point == 0:
        return value
    x = value.ring.variable(variable)
    return value.substitute({variable: 1 / x if isinstance(point, Infinity) else x + point})


def _row_conditions(
    sources: _Sources, space: JointSpace, vector: Combination, view: EdgeView, point: Point, order: int
) -> Iterator[tuple[str, _Row]]:
    """Conditions on one function, or a combination, in one joint generalised eigenspace."""
    allowed = sources.allowed(space.values)
    logarithmic = {i for exponent in allowed for i, logs in enumerate(exponent.logs) if logs}
    size = space.projector.ncols()
    left = flint.fmpq_mat(1, size, [flint.fmpq(v.numerator, v.denominator) for v in vector])
    zero = (0,) * len(space.values)
    series = None
    if not allowed and any(v.slopes == space.values for v in sources.values):
        series = class_sum(sources.values, _rational(space.values), zero, order)
        if not any(series.coefficients):
            series = None
    name = _name(space.values, bool(allowed), series is not None, view.edge.point_text(point))
    if not allowed:
        entries = (left * space.projector).entries()
        if any(entries) or series is not None:
            yield name, (entries, series)
    for factors, matrix in space.nilpotents:
        # a product of nilpotent parts multiplies a product of logarithms of the same quantities
        if factors <= logarithmic:
            continue
        entries = (left * matrix).entries()
        if any(entries):
            yield name, (entries, None)


def _rational(slopes: _Slopes) -> tuple[Fraction, ...]:
    return tuple(slope for slope in slopes if slope is not None)


def _name(slopes: _Slopes, allowed: bool, valued: bool, where: str) -> str:
    if valued:
        return f"Gamma-function values at {where}"
    if None in slopes:
        return f"no irrational exponent at {where}"
    shown = str(slopes[0]) if len(slopes) == 1 else f"({', '.join(map(str, slopes))})"
    if allowed:
        return f"no logarithm with exponent {shown}*eps at {where}"
    if not any(slopes):
        return f"vanishing at {where}"
    return f"no exponent {shown}*eps at {where}"


def _check_classes(
    sources: _Sources, spaces: Sequence[JointSpace], order: int, view: EdgeView, row: int
) -> None:
    """Every class of exponents among the closed forms must be a joint eigenvalue of the residues."""
    eigenvalues = {space.values for space in spaces}
    for slopes in {value.slopes for value in sources.values} - eigenvalues:
        zero = (0,) * len(slopes)
        if any(class_sum(sources.values, slopes, zero, order).coefficients) and not sources.allowed(slopes):
            factors = "*".join(f"{n}^({s}*eps)" for n, s in zip(view.names, slopes, strict=True) if s)
            raise BoundaryError(
                f"the closed forms in canonical function {row + 1} behave like {factors} at "
                f"{view.edge.point_text(Fraction(0))}, which the differential equation forbids: one of the "
                "two is wrong"
            )


def _check_poles(values: Sequence[Contribution], order: int, view: EdgeView, row: int) -> None:
    """A canonical function known in closed form must not have a power-like pole at the corner."""
    for slopes, powers in {(value.slopes, value.powers) for value in values}:
        if any(powers) and any(class_sum(values, slopes, powers, order).coefficients):
            pole = "*".join(f"{n}^{p}" for n, p in zip(view.names, powers, strict=True) if p)
            raise BoundaryError(
                f"the closed forms in canonical function {row + 1} ({view.masters[row].label}) have a pole "
                f"{pole} at {view.edge.point_text(Fraction(0))}, which the epsilon-form forbids: one of the "
                "two is wrong"
            )
