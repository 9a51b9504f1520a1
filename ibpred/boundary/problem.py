"""From a family and its epsilon-form to the problem of its boundary constants."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from types import MappingProxyType

from ibpred.boundary.behaviour.expansion import ClosedForm, expand, on_line
from ibpred.boundary.behaviour.gamma import gamma_form
from ibpred.boundary.behaviour.regions import parametric_family
from ibpred.boundary.behaviour.sheets import Behaviours, behaviours
from ibpred.boundary.conditions.explore import BoundaryProblem
from ibpred.boundary.conditions.fix import Boundary
from ibpred.boundary.conditions.sources import Master
from ibpred.epsform.form import EpsilonForm
from ibpred.errors import BoundaryError, InputError
from ibpred.exact.rational import Rational, Ring, ring
from ibpred.family.cuts import refuse_cuts
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.iterated.alphabet import usual_corner
from ibpred.iterated.constants.series import Series
from ibpred.iterated.solution import letter_roots


def region_values(
    family: FamilyDefinition, signs: Mapping[str, int], field: Ring, ratios: Sequence[str]
) -> dict[str, Rational]:
    """The invariants in the region where all ratios are positive: each its sign times its ratio.

    Parameters
    ----------
    family
        The family.
    signs
        +1 or -1 for each invariant, as in the Euclidean region.
    field
        Q(eps, ratios).
    ratios
        Names of the ratios, one for each invariant but the unit, in order.

    Raises
    ------
    InputError
        If their number does not fit.
    """
    others = [invariant.name for invariant in family.invariants if invariant.name != family.unit]
    if len(others) != len(ratios):
        raise InputError(f"{family.name} has {len(others)} ratios, not {len(ratios)}")
    values = {name: field.variable(r) * signs[name] for name, r in zip(others, ratios, strict=True)}
    if family.unit is not None:
        values[family.unit] = field.constant(signs[family.unit])
    return values


def closed_form_on_line(
    family: FamilyDefinition, powers: Powers, values: Mapping[str, Rational], field: Ring, real: bool
) -> ClosedForm | None:
    """The closed form of an integral in terms of the ratios, where there is one.

    Raises
    ------
    BoundaryError
        If it has a phase where all should be `real`; also as `ibpred.boundary.behaviour.expansion.on_line`.
    """
    form = gamma_form(family, powers)
    if form is None:
        return None
    found = on_line(form, values, field)
    if real and found.half_turns:
        raise BoundaryError(
            f"{master_label(family, powers)} is not real for small positive ratios: its scales are not "
            "positive in the Euclidean region"
        )
    return found


def one_scale_values(
    family: FamilyDefinition,
    masters: Sequence[Powers],
    signs: Mapping[str, int],
    order: int,
    fitted: Mapping[Powers, Series] = MappingProxyType({}),
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
    fitted
        Masters that were recognised from values (`ibpred.boundary.recognise.recognise_series`); closed
        forms go first.

    Raises
    ------
    InputError
        If the family has a ratio.
    UnfinishedError
        If a line is cut.
    BoundaryError
        If a master is no product of Gamma functions and not fitted through that order (names it), or needs
        a constant that is not known exactly.
    """
    refuse_cuts(family)
    field = ring(("eps",))
    values = region_values(family, signs, field, ())
    found = []
    for powers in masters:
        closed = closed_form_on_line(family, powers, values, field, True)
        if closed is not None:
            found.append(expand(closed, order))
        elif powers in fitted and fitted[powers].end >= order:
            found.append(fitted[powers])
        else:
            raise BoundaryError(
                f"{master_label(family, powers)} is no product of Gamma functions, and without a ratio no "
                "differential equation fixes its value"
            )
    return tuple(found)


def without_closed_form(
    family: FamilyDefinition, masters: Sequence[Powers], signs: Mapping[str, int]
) -> tuple[Powers, ...]:
    """The masters of a family without a ratio that are no products of Gamma functions: to be fitted."""
    field = ring(("eps",))
    values = region_values(family, signs, field, ())
    return tuple(p for p in masters if closed_form_on_line(family, p, values, field, True) is None)


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
    """Collect what is known of the masters of a family whose form is in its own ratios.

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
        If the number of ratios does not fit.
    """
    values = region_values(family, signs, form.ring, form.variables)
    return problem_in_variables(family, masters, form, values, weight, True)


def problem_in_variables(
    family: FamilyDefinition,
    masters: Sequence[Powers],
    form: EpsilonForm,
    values: Mapping[str, Rational],
    weight: int,
    real: bool,
) -> BoundaryProblem:
    """As `boundary_problem`, for a form in other variables than the ratios, or another region.

    Parameters
    ----------
    family, masters, form, weight
        As there.
    values
        The invariants in terms of the form's variables, over its field, the unit +1 or -1. The region must
        touch the corner where all variables are small and positive.
    real
        Whether the region is Euclidean. Else closed forms are used with their phases, and how the other
        masters behave is read off where their own F is positive.

    Raises
    ------
    UnfinishedError
        If a line is cut.
    """
    refuse_cuts(family)
    known = []
    for powers in masters:
        closed = closed_form_on_line(family, powers, values, form.ring, real)
        label = master_label(family, powers)
        found = None if real or closed is not None else _behaviours(family, powers, form, values)
        if found is None:
            known.append(Master(label, closed, powers))
        else:
            known.append(Master(label, closed, powers, found.at_ends, found.at_infinity))
    return BoundaryProblem(
        form,
        tuple(known),
        parametric_family(family, values) if real else None,
        usual_corner(form),
        len(family.loops),
        weight,
        real=real,
    )


def _behaviours(
    family: FamilyDefinition, powers: Powers, form: EpsilonForm, values: Mapping[str, Rational]
) -> Behaviours | None:
    """How a master may behave at letters near a region of scattering, where these are known."""
    if len(form.variables) != 1 or not all(_is_ratio(value, form.variables[0]) for value in values.values()):
        return None
    roots = letter_roots(form.letters, form.variables[0])
    if None in roots:
        return None
    letters = {Fraction(0), *(root for root in roots if root is not None)}
    return behaviours(family, powers, values, form.variables[0], letters)


def _is_ratio(value: Rational, variable: str) -> bool:
    """Whether an invariant is of first degree in the variable of the form."""
    return value.is_polynomial() and variable not in value.derivative(variable).variables()


def boundary_of_series(exact: Sequence[Series]) -> Boundary:
    """The boundary constants of a family without a ratio: the coefficients of its masters."""
    start, end = min(s.start for s in exact), min(s.end for s in exact)
    constants = tuple(tuple(s.coefficient(k) for s in exact) for k in range(start, end + 1))
    return Boundary(start, constants, (), ())
