"""Route one to numbers: a solved epsilon-form with exact boundary constants; rigorous balls."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import TYPE_CHECKING

from ibpred.epsform.form import EpsilonForm
from ibpred.errors import PointError, UnfinishedError
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.family.signs import masses
from ibpred.family.units import integral_dimension
from ibpred.numerics.canonical import CanonicalSystem, canonical_system, refuse_singular
from ibpred.numerics.evaluate import Place, evaluate_places
from ibpred.numerics.masters import Row, integral_row, master_rows, needed_order
from ibpred.numerics.path import Target
from ibpred.numerics.point import KinematicPoint, kinematic_point
from ibpred.numerics.value import Value

if TYPE_CHECKING:
    from ibpred.run.chain import Chain

_BITS_PER_DIGIT = 40  # ceiling of the working precision before evaluation gives up
_AT_REST = Target(Fraction(1), 0)  # the ratio of a family that has none


def form_values(
    chain: Chain,
    points: Sequence[Mapping[str, Fraction]],
    wanted: Sequence[Powers],
    order: int,
    digits: int,
) -> tuple[tuple[Value, ...], ...]:
    """Values at points from the solved epsilon-form; see `ibpred.run.values.evaluate_points`.

    Raises
    ------
    PointError
        If a point is incomplete or singular.
    UnfinishedError
        If the family is not solved, or the digits cannot be reached.
    """
    family = chain.definition
    if len(family.invariants) > 2:
        raise UnfinishedError(
            f"{family.name} depends on {len(family.invariants) - 1} ratios, and canonical functions are "
            "summed for one ratio or none"
        )
    chosen = [_place(chain, point) for point in points]
    form = chain.solved_form()
    system = canonical_system(form) if form.variables else CanonicalSystem(len(form.transformation), ())
    places = []
    for place in chosen:
        ratio = next(iter(place.ratios.values()), _AT_REST)
        if form.variables:
            refuse_singular(system, ratio.value)
        masters = _master_rows(family, form, ratio.value, chain.masters().masters)
        rows = masters if not wanted else _integral_rows(chain, wanted, masters, place)
        places.append(Place(rows, ratio, place.unit))
    rows_of_all = [row for place in places for row in place.rows]
    weight = max(needed_order(rows_of_all, order) or 0, 2 * len(family.loops))
    boundary = chain.boundary(weight)
    chain.progress.stage("values")
    ceiling = _BITS_PER_DIGIT * digits + 4000
    return evaluate_places(system, boundary.constants, boundary.start, places, order, digits, ceiling)


def is_singular(chain: Chain, point: Mapping[str, Fraction]) -> str | None:
    """Why a point is none at which values exist; None where it is one.

    A point is singular where a letter, or a pole of the masters' basis, vanishes.
    """
    try:
        place = _place(chain, point)
        form = chain.solved_form()
        if form.variables:
            ratio = next(iter(place.ratios.values()))
            refuse_singular(canonical_system(form), ratio.value)
            _master_rows(chain.definition, form, ratio.value, chain.masters().masters)
    except PointError as error:
        return str(error)
    return None


def _place(chain: Chain, point: Mapping[str, Fraction]) -> KinematicPoint:
    family = chain.definition
    signs = chain.euclidean_signs()
    dimensions = {invariant.name: invariant.dimension for invariant in family.invariants}
    return kinematic_point(point, signs, family.unit, dimensions, masses(family))


def _exponent(family: FamilyDefinition, powers: Powers) -> tuple[Fraction, Fraction]:
    constant, slope = integral_dimension(family, powers)
    if family.unit is None:
        return Fraction(0), Fraction(0)
    size = next(i.dimension for i in family.invariants if i.name == family.unit)
    return Fraction(constant, size), Fraction(slope, size)


def _master_rows(
    family: FamilyDefinition, form: EpsilonForm, x: Fraction, masters: Sequence[Powers]
) -> tuple[Row, ...]:
    exponents = [_exponent(family, powers) for powers in masters]
    return master_rows(form, x, masters, exponents)


def _integral_rows(
    chain: Chain, wanted: Sequence[Powers], masters: Sequence[Row], place: KinematicPoint
) -> tuple[Row, ...]:
    family = chain.definition
    table = chain.reduction(tuple(dict.fromkeys(wanted)))
    unit = Fraction(1)
    if family.unit is not None:
        unit = chain.euclidean_signs()[family.unit] * place.values[family.unit]
    rows = []
    for powers in wanted:
        combination = dict(table.reductions[powers])
        exponent = _exponent(family, powers)
        rows.append(
            integral_row(powers, exponent, combination, masters, family.dimension, place.values, unit)
        )
    return tuple(rows)
