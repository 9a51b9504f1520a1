"""Linear conditions on boundary vectors: known functions, forbidden exponents, regular points.

Near a point, ``f = (1 + O(u)) u^(eps A) c`` with c the boundary vector there. The part of row i in the
generalised eigenspace of eigenvalue lambda is the coefficient of ``u^(lambda eps)`` (with powers of log u),
at u^0. It comes from the masters in that row of ``f = T^-1 I``, so it is absent unless one of them has
an exponent n + lambda eps with n plus the valuation of the entry of T^-1 at most zero.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import flint

from ibpred.boundary.eigen import Eigenspace, eigenspaces
from ibpred.boundary.expansion import ClosedForm
from ibpred.boundary.local import Contribution, class_sum, contribution
from ibpred.boundary.regions import Behaviour, Exponent, behaviour_of_closed_form, valuation
from ibpred.epsform.form import EpsilonForm
from ibpred.errors import BoundaryError
from ibpred.iterated.series import Series
from ibpred.iterated.transport import Point, point_text


@dataclass(frozen=True)
class Master:
    """What is known of one master integral on the Euclidean line of the ratio.

    Attributes
    ----------
    label
        Its name, for messages.
    closed
        Its closed form, where there is one.
    behaviours
        What it can do at each singular point; a point that is missing is one where nothing is known.
    """

    label: str
    closed: ClosedForm | None
    behaviours: Mapping[Point, Behaviour]


@dataclass(frozen=True)
class Condition:
    """``rows @ c_point = values`` for the boundary vector at a point.

    Attributes
    ----------
    name
        What it says, for evidence and messages.
    point
        Where.
    rows
        m x n `flint.fmpq_mat`, free of eps.
    values
        One series in eps for each row; None for zero.
    """

    name: str
    point: Point
    rows: Any
    values: tuple[Series | None, ...]


def conditions_at(
    form: EpsilonForm, masters: Sequence[Master], residue: Any, point: Point, order: int
) -> tuple[Condition, ...]:
    """All conditions at one point.

    Parameters
    ----------
    form
        The epsilon-form in one ratio.
    masters
        One for each row of the masters' vector.
    residue
        Residue of the connection there, over eps.
    point
        The point; at 0 closed forms are used with their values, elsewhere with their exponents.
    order
        Values are given through ``eps^order``.

    Raises
    ------
    BoundaryError
        If a closed form contradicts the differential equation at x = 0.
    """
    spaces = eigenspaces(residue)
    size = len(masters)
    gathered: dict[str, list[_Row]] = {}
    for i in range(size):
        sources = _sources(form, masters, i, point)
        if sources is None:
            continue
        if not sources.unknown:
            _check_poles(sources.values, order, masters[i].label, i)
        _check_classes(sources, spaces, order, i)
        for space in spaces:
            for name, row in _row_conditions(sources, space, i, point, order):
                gathered.setdefault(name, []).append(row)
    found = []
    for name, rows in gathered.items():
        matrix = flint.fmpq_mat(len(rows), size, [entry for row, _ in rows for entry in row])
        found.append(Condition(name, point, matrix, tuple(value for _, value in rows)))
    # values first: later conditions are then seen to confirm or to contradict them
    return tuple(sorted(found, key=lambda c: (all(v is None for v in c.values), c.name)))


_Row = tuple[Sequence[Any], Series | None]


@dataclass(frozen=True)
class _Sources:
    """What one canonical function is made of: closed forms expanded, and other masters' behaviours."""

    values: tuple[Contribution, ...]
    unknown: tuple[tuple[Behaviour, int], ...]  # with the valuation of the factor

    def allowed(self, slope: Fraction | None) -> tuple[Exponent, ...]:
        """Behaviours of the masters without values that can show up at u^0 in one class."""
        return tuple(
            exponent
            for behaviour, shift in self.unknown
            for exponent in behaviour
            if exponent.slope == slope and exponent.power + shift <= 0
        )


def _sources(form: EpsilonForm, masters: Sequence[Master], row: int, point: Point) -> _Sources | None:
    variable = form.variables[0]
    values: list[Contribution] = []
    unknown: list[tuple[Behaviour, int]] = []
    for master, entry in zip(masters, form.inverse[row], strict=True):
        if not entry:
            continue
        if master.closed is not None and point == 0:
            values.append(contribution(entry, master.closed, variable))
            continue
        behaviour = _behaviour(master, variable, point)
        if behaviour is None:
            return None
        unknown.append((behaviour, valuation(entry, variable, point)))
    return _Sources(tuple(values), tuple(unknown))


def _row_conditions(
    sources: _Sources, space: Eigenspace, row: int, point: Point, order: int
) -> Iterator[tuple[str, _Row]]:
    """Conditions on one row in one generalised eigenspace."""
    allowed = sources.allowed(space.value)
    if any(exponent.logs for exponent in allowed):
        return
    size = space.chain[0].ncols()
    series = None
    if not allowed and any(v.slope == space.value and v.lowest <= 0 for v in sources.values):
        series = class_sum(sources.values, space.value or Fraction(0), 0, order)
    name = _name(space.value, bool(allowed), series is not None, point)
    for depth in range(1 if allowed else 0, len(space.chain)):
        entries = [space.chain[depth][row, k] for k in range(size)]
        value = series if depth == 0 else None
        if any(entries) or value is not None:
            yield name, (entries, value)


def _behaviour(master: Master, variable: str, point: Point) -> Behaviour | None:
    if master.closed is not None:
        return behaviour_of_closed_form(master.closed, variable, point)
    return master.behaviours.get(point)


def _name(value: Fraction | None, allowed: bool, valued: bool, point: Point) -> str:
    where = point_text(point)
    if valued:
        return f"Gamma-function values at {where}"
    if value is None:
        return f"no irrational exponent at {where}"
    if allowed:
        return f"no logarithm with exponent {value}*eps at {where}"
    if value == 0:
        return f"vanishing at {where}"
    return f"no exponent {value}*eps at {where}"


def _check_classes(sources: _Sources, spaces: Sequence[Eigenspace], order: int, row: int) -> None:
    """Every class of exponents among the closed forms must be an eigenvalue of the residue."""
    eigenvalues = {space.value for space in spaces}
    for slope in {value.slope for value in sources.values} - eigenvalues:
        if any(class_sum(sources.values, slope, 0, order).coefficients) and not sources.allowed(slope):
            raise BoundaryError(
                f"the closed forms in canonical function {row + 1} behave like x^({slope}*eps) at x = 0, "
                "which the differential equation forbids: one of the two is wrong"
            )


def _check_poles(values: Sequence[Contribution], order: int, label: str, row: int) -> None:
    """A canonical function known in closed form must not have a power-like pole at x = 0."""
    lowest = min((value.lowest for value in values), default=0)
    for slope in {value.slope for value in values}:
        for power in range(lowest, 0):
            if any(class_sum(values, slope, power, order).coefficients):
                raise BoundaryError(
                    f"the closed forms in canonical function {row + 1} ({label}) have a pole x^{power} "
                    "at x = 0, which the epsilon-form forbids: one of the two is wrong"
                )
