"""A point at which the masters follow from an epsilon-form in other variables than the ratios.

In variables such as w with ``-s/m2 = (1-w)^2/w`` most rational points of the invariants have irrational
images. The masters are evaluated at one rational point of the variables in the Euclidean region and carried
from there by their own differential system.
"""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction
from itertools import product

from ibpred.epsform.form import EpsilonForm
from ibpred.errors import PointError, UnfinishedError
from ibpred.family.units import unit_exponent
from ibpred.iterated.solution import fibration
from ibpred.numerics.forms.channels import is_next_to_corner
from ibpred.numerics.forms.evaluate import Place, evaluate_places
from ibpred.numerics.forms.masters import master_rows, needed_order
from ibpred.numerics.forms.path import Target
from ibpred.numerics.forms.several import refuse_singular_point
from ibpred.run.chain.chain import Chain
from ibpred.run.constants.known_points import KnownPoint
from ibpred.run.values.form_values import bits_ceiling, form_functions

_SIZES = (Fraction(1, 4), Fraction(1, 5), Fraction(2, 7), Fraction(1, 9))
_AT_ONE = Target(Fraction(1), 0)


def lifted_point(chain: Chain, order: int, digits: int) -> KnownPoint:
    """The masters at a point near the corner of the epsilon-form's variables, with rigorous errors.

    Raises
    ------
    UnfinishedError
        If there is no solved epsilon-form, or no suitable point.
    """
    form = chain.solved_form()
    variables, point = _base(chain, form)
    masters = chain.masters().masters
    exponents = [unit_exponent(chain.definition, powers) for powers in masters]
    rows = master_rows(form, variables, masters, exponents)
    targets = {name: Target(value, 0) for name, value in variables.items()}
    weight = max(needed_order(rows, order) or 0, 2 * len(chain.definition.loops))
    boundary = chain.boundary(weight)
    values = evaluate_places(
        form_functions(form, boundary),
        boundary.constants,
        boundary.start,
        (Place(rows, targets, _AT_ONE),),
        order,
        digits,
        bits_ceiling(digits),
    )[0]
    return KnownPoint(point, order, digits, tuple(value.epsilon for value in values))


def _base(chain: Chain, form: EpsilonForm) -> tuple[Mapping[str, Fraction], dict[str, Fraction]]:
    """Values of the variables and of the invariants at a regular point of the region of the solution."""
    signs, coordinates = chain.signs(), chain.coordinates()
    levels = []
    if not chain.is_euclidean():
        levels = [level for level, _ in fibration(form, tuple(reversed(form.variables)))]
    for size, doubled in product(_SIZES, (False, True)):
        powers = [2**k if doubled else k + 1 for k in range(len(coordinates.names))]
        variables = {name: size**n for name, n in zip(coordinates.names, powers, strict=True)}
        try:
            refuse_singular_point(form, {name: Target(value, 0) for name, value in variables.items()})
            point = {name: v.substitute(variables).to_fraction() for name, v in coordinates.values.items()}
        except (PointError, ZeroDivisionError):
            continue
        if not is_next_to_corner(levels, variables):
            continue
        if all(value * signs[name] > 0 for name, value in point.items()):
            return variables, {i.name: point[i.name] for i in chain.definition.invariants}
    raise UnfinishedError(
        f"no point of the region of the solution was found where {', '.join(coordinates.names)} are small "
        "and positive"
    )
