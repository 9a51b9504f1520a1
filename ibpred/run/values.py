"""Numbers from a solved chain: point, rows, orders that are needed, evaluation."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import TYPE_CHECKING

from ibpred.epsform.form import EpsilonForm
from ibpred.errors import UnfinishedError
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.family.signs import masses
from ibpred.family.units import integral_dimension
from ibpred.numerics.canonical import CanonicalSystem, canonical_system, refuse_singular
from ibpred.numerics.evaluate import evaluate_rows
from ibpred.numerics.masters import Row, integral_row, master_rows, needed_order
from ibpred.numerics.path import Target
from ibpred.numerics.point import KinematicPoint, kinematic_point
from ibpred.numerics.value import Value
from ibpred.reduction.wanted import check_powers

if TYPE_CHECKING:
    from ibpred.run.chain import Chain

_BITS_PER_DIGIT = 40  # ceiling of the working precision before evaluation gives up
_AT_REST = Target(Fraction(1), 0)  # the ratio of a family that has none


def evaluate(
    chain: Chain, point: Mapping[str, Fraction], wanted: Sequence[Powers], order: int, digits: int
) -> tuple[Value, ...]:
    """Values at a point, of the masters or of given integrals.

    Parameters
    ----------
    chain
        The family's chain; it is solved as far as needed.
    point
        Exact values of all invariants.
    wanted
        Integrals; the masters where none is given.
    order
        Highest power of eps.
    digits
        Digits wanted of every coefficient.

    Raises
    ------
    PointError
        If the point is incomplete or singular.
    UnfinishedError
        If the family is not solved, or the digits cannot be reached.
    """
    family = chain.definition
    for powers in wanted:
        check_powers(family, powers)
    place = _place(chain, point)
    form = chain.solved_form()
    system = canonical_system(form) if form.variables else CanonicalSystem(len(form.transformation), ())
    ratio = next(iter(place.ratios.values()), _AT_REST)
    x = -ratio.modulus if ratio.half_turns else ratio.modulus
    if form.variables:
        refuse_singular(system, x)
    masters = _master_rows(family, form, x, chain.masters().masters)
    rows = masters if not wanted else _integral_rows(chain, wanted, masters, place)
    weight = max(needed_order(rows, order) or 0, 2 * len(family.loops))
    boundary = chain.boundary(weight)
    chain.progress.stage("values")
    return evaluate_rows(
        system,
        boundary.constants,
        boundary.start,
        rows,
        ratio,
        place.unit,
        order,
        digits,
        _BITS_PER_DIGIT * digits + 4000,
    )


def _place(chain: Chain, point: Mapping[str, Fraction]) -> KinematicPoint:
    family = chain.definition
    if len(family.invariants) > 2:
        raise UnfinishedError(
            f"{family.name} depends on {len(family.invariants) - 1} ratios; values are computed for families "
            "with one ratio or none"
        )
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
