"""Canonical functions made as pure as the differential equation leaves open: parity, powers of eps."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import replace

from ibpred.boundary.conditions.explore import BoundaryProblem
from ibpred.boundary.conditions.fix import OpenConstantsError, fix_constants
from ibpred.epsform.form import EpsilonForm, Obstructed
from ibpred.epsform.matrices import identity, scaled
from ibpred.epsform.roots.parity import involution, with_parity
from ibpred.errors import UnfinishedError
from ibpred.exact.rational import Rational, ring
from ibpred.iterated.constants.series import eps_valuation


def normalised(
    found: EpsilonForm | Obstructed,
    values: Iterable[Rational],
    problem: Callable[[EpsilonForm], BoundaryProblem],
) -> EpsilonForm | Obstructed:
    """Choose functions of definite parity where a variable has a symmetry, beginning at ``eps^0``.

    The differential equation is blind to a power of eps that multiplies all of them; the boundary
    constants tell it: where some stay open, those that are known.

    Parameters
    ----------
    found
        The epsilon-form as factorised; an obstruction stays as it is. Where square roots are left, no parity
        is looked for.
    values
        The invariants in the variables of the form.
    problem
        What the boundary constants of a form follow from.
    """
    if isinstance(found, Obstructed):
        return found
    images = tuple(values)
    for name in found.variables if not any(found.tags) else ():
        symmetry = involution(images, name)
        if symmetry is not None:
            found = with_parity(found, name, symmetry)
    try:
        found = _scaled(found, 1 / _first_factor(found, problem(found)))
        start = _first_order(problem(found))
    except UnfinishedError:
        return found
    return _scaled(found, found.ring.variable("eps") ** -start)


def _first_order(problem: BoundaryProblem) -> int:
    """The power of eps at which the first function that is known begins."""
    try:
        return fix_constants(problem).start
    except OpenConstantsError as error:
        orders = [order for (order, _), constant in error.known.items() if constant]
        return min(orders, default=0)


def trivial_form(count: int) -> EpsilonForm:
    """The form of masters that depend on no ratio: they are their own canonical functions."""
    field = ring(("eps",))
    one = identity(field, count)
    return EpsilonForm((), field, (), (), one, one, ((),) * count)


def _first_factor(form: EpsilonForm, problem: BoundaryProblem) -> Rational:
    """What multiplies Gamma functions in the first function that is one closed form: a function of eps.

    Without it that function is as pure as its Gamma functions, and so are those that couple to it.
    """
    for row, tag in zip(form.inverse, form.tags, strict=True):
        used = [j for j, entry in enumerate(row) if entry]
        closed = problem.masters[used[0]].closed
        if len(used) != 1 or closed is None or tag:
            continue
        factor = row[used[0]] * closed.rational
        if set(factor.variables()) <= {"eps"}:
            rest = factor / form.ring.variable("eps") ** eps_valuation(factor)
            return rest / rest.substitute({"eps": 0})
    return form.ring.one


def _scaled(form: EpsilonForm, factor: Rational) -> EpsilonForm:
    """All functions times a function of eps."""
    return replace(
        form, transformation=scaled(form.transformation, 1 / factor), inverse=scaled(form.inverse, factor)
    )
