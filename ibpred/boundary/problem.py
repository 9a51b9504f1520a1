"""From a family and its epsilon-form to the problem of its boundary constants."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction

from ibpred.boundary.conditions import Master
from ibpred.boundary.expansion import ClosedForm, expand, on_line
from ibpred.boundary.fix import BoundaryProblem
from ibpred.boundary.gamma import gamma_form
from ibpred.boundary.regions import Behaviour, behaviour, parametric_family
from ibpred.epsform.form import EpsilonForm
from ibpred.errors import BoundaryError, InputError
from ibpred.exact.rational import Rational, Ring, ring
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.iterated.series import Series
from ibpred.iterated.solution import letter_roots
from ibpred.iterated.transport import INFINITY, Point


def line_values(
    family: FamilyDefinition, signs: Mapping[str, int], field: Ring, variable: str | None
) -> dict[str, Rational]:
    """The invariants on the Euclidean line: the unit its sign, the other one its sign times the ratio.

    Parameters
    ----------
    family
        The family.
    signs
        +1 or -1 for each invariant, as in the Euclidean region.
    field
        Q(eps, ratio), or Q(eps) where there is no ratio.
    variable
        Name of the ratio; None for a family with no other invariant than the unit.

    Raises
    ------
    InputError
        If the family has more invariants.
    """
    values: dict[str, Rational] = {}
    for invariant in family.invariants:
        if invariant.name == family.unit:
            values[invariant.name] = field.constant(signs[invariant.name])
        elif variable is not None and len(family.invariants) <= 2:
            values[invariant.name] = field.variable(variable) * signs[invariant.name]
        else:
            raise InputError(
                f"{family.name} has several ratios; boundary constants are determined here for at most one"
            )
    return values


def closed_form_on_line(
    family: FamilyDefinition, powers: Powers, values: Mapping[str, Rational], field: Ring
) -> ClosedForm | None:
    """The closed form of an integral on a line of kinematics, where there is one."""
    form = gamma_form(family, powers)
    return None if form is None else on_line(form, values, field)


def one_scale_values(
    family: FamilyDefinition, masters: Sequence[Powers], signs: Mapping[str, int], order: int
) -> tuple[Series, ...]:
    """Laurent expansions of the masters of a family without a ratio, the unit at its Euclidean sign.

    Parameters
    ----------
    family
        A family with at most one invariant.
    masters
        Their powers.
    signs
        Sign of the unit in the Euclidean region.
    order
        Highest power of eps.

    Raises
    ------
    InputError
        If the family has a ratio.
    BoundaryError
        If a master is no product of Gamma functions (names it), or needs a constant that is not known
        exactly.
    """
    field = ring(("eps",))
    values = line_values(family, signs, field, None)
    found = []
    for powers in masters:
        closed = closed_form_on_line(family, powers, values, field)
        if closed is None:
            raise BoundaryError(
                f"{master_label(family, powers)} is no product of Gamma functions, and without a ratio no "
                "differential equation fixes its value"
            )
        found.append(expand(closed, order))
    return tuple(found)


def master_label(family: FamilyDefinition, powers: Powers) -> str:
    """``family(1,1,0)``, for messages."""
    return f"{family.name}({','.join(map(str, powers))})"


def boundary_problem(
    family: FamilyDefinition,
    masters: Sequence[Powers],
    form: EpsilonForm,
    signs: Mapping[str, int],
    weight: int,
) -> BoundaryProblem:
    """Collect what is known of the masters of a family with one ratio.

    Parameters
    ----------
    family
        The family.
    masters
        Their powers, in the order of the form's rows.
    form
        The epsilon-form.
    signs
        Signs of the invariants in the Euclidean region.
    weight
        Highest power of eps of the canonical functions for which constants are wanted.

    Raises
    ------
    InputError
        If there is not exactly one ratio.
    """
    if len(form.variables) != 1:
        raise InputError(f"{family.name}: boundary constants are determined here for one ratio")
    variable = form.variables[0]
    values = line_values(family, signs, form.ring, variable)
    parametric = parametric_family(family, values, variable)
    roots = letter_roots(form.letters, variable)
    points: set[Point] = {Fraction(0), INFINITY, *(root for root in roots if root is not None)}
    known = []
    for powers in masters:
        label = master_label(family, powers)
        closed = closed_form_on_line(family, powers, values, form.ring)
        behaviours: dict[Point, Behaviour] = {}
        if closed is None:
            for point in points:
                found = behaviour(parametric, powers, point)
                if found is not None:
                    behaviours[point] = found
        known.append(Master(label, closed, behaviours))
    return BoundaryProblem(form, tuple(known), len(family.loops), weight)
