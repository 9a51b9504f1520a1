"""Route one to numbers: a solved epsilon-form with exact boundary constants; rigorous balls."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction

from ibpred.boundary.conditions.fix import Boundary
from ibpred.epsform.form import EpsilonForm
from ibpred.errors import UnfinishedError
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.family.signs import masses
from ibpred.family.units import unit_exponent
from ibpred.iterated.solution import fibration, letter_roots
from ibpred.numerics.forms.canonical import CanonicalSystem, canonical_system
from ibpred.numerics.forms.channels import BASE, Channel, channel_of, is_next_to_corner, scattering_point
from ibpred.numerics.forms.evaluate import (
    Functions,
    InOneRatio,
    InSeveralRatios,
    Place,
    WithRoots,
    evaluate_places,
)
from ibpred.numerics.forms.masters import Row, integral_row, master_rows, needed_order
from ibpred.numerics.forms.path import Target
from ibpred.numerics.forms.point import KinematicPoint, kinematic_point
from ibpred.numerics.forms.several import refuse_singular_point
from ibpred.numerics.value import Value
from ibpred.reduction.table import ReductionTable
from ibpred.run.chain.chain import Chain
from ibpred.run.constants.solved import boundary_in

_BITS_PER_DIGIT = 40


def form_values(
    chain: Chain,
    points: Sequence[Mapping[str, Fraction]],
    wanted: Sequence[Powers],
    order: int,
    digits: int,
) -> tuple[tuple[Value, ...], ...]:
    """Values at points from the solved epsilon-form; see `ibpred.run.values.evaluate.evaluate_points`.

    Raises
    ------
    PointError
        If a point is incomplete or singular.
    UnfinishedError
        If the family is not solved, or the digits cannot be reached.
    """
    family = chain.definition
    if not (chain.is_euclidean() or chain.in_ratios()):
        raise UnfinishedError(
            "outside a Euclidean region values are taken in the ratios, but the epsilon-form is in "
            f"{', '.join(chain.coordinates().names)}"
        )
    form = chain.solved_form() if chain.in_ratios() else chain.ratio_form()
    chosen = [place_of(chain, point) for point in points]
    named = [dict(zip(form.variables, place.ratios.values(), strict=False)) for place in chosen]
    for ratios in named:
        refuse_singular_point(form, ratios)
    masters = chain.masters().masters
    table = chain.reduction(tuple(dict.fromkeys(wanted))) if wanted else None
    places = []
    for place, ratios in zip(chosen, named, strict=True):
        rows = _master_rows(family, form, ratios, masters)
        if table is not None:
            rows = _integral_rows(chain, table, wanted, rows, place)
        places.append(Place(rows, ratios, place.unit))
    rows_of_all = [row for place in places for row in place.rows]
    weight = max(needed_order(rows_of_all, order) or 0, 2 * len(family.loops))
    found: dict[int, tuple[Value, ...]] = {}
    groups: dict[Channel | None, list[int]] = {}
    elsewhere: list[int] = []
    for number, place in enumerate(chosen):
        if chain.left_euclidean_region() and not _is_inside(form, place):
            elsewhere.append(number)
        else:
            groups.setdefault(channel_at(chain, form, place), []).append(number)
    if elsewhere:
        others = [points[number] for number in elsewhere]
        values = form_values(chain.in_euclidean_region(), others, wanted, order, digits)
        found |= dict(zip(elsewhere, values, strict=True))
    for channel, group in groups.items():
        boundary = boundary_at(chain, channel, weight)
        chain.progress.stage("values")
        values = evaluate_places(
            form_functions(form, boundary),
            boundary.constants,
            boundary.start,
            [places[number] for number in group],
            order,
            digits,
            bits_ceiling(digits),
            certified=not boundary.fitted,
        )
        found |= dict(zip(group, values, strict=True))
    return tuple(found[number] for number in range(len(places)))


def channel_at(chain: Chain, form: EpsilonForm, place: KinematicPoint) -> Channel | None:
    """The region of a point that has constants of its own; None where one set serves all regions.

    Raises
    ------
    UnfinishedError
        If the regions are not known.
    """
    if chain.is_euclidean():
        return None
    if len(form.variables) != 1:
        if _is_inside(form, place):
            return BASE
        raise UnfinishedError(
            "outside a Euclidean region and in several ratios constants are known in one region only: at "
            f"the corner {' << '.join((*reversed(form.variables), '1'))}"
        )
    (ratio,) = place.ratios.values()
    return channel_of(ratio.value, place.unit.half_turns, letter_roots(form.letters, form.variables[0]))


def _is_inside(form: EpsilonForm, place: KinematicPoint) -> bool:
    """Whether a point lies in the region of the solution, which is not Euclidean."""
    levels = [level for level, _ in fibration(form, tuple(reversed(form.variables)))]
    ratios = dict(zip(form.variables, (target.value for target in place.ratios.values()), strict=True))
    positive = place.unit.half_turns == 0 and all(value > 0 for value in ratios.values())
    return positive and is_next_to_corner(levels, ratios)


def boundary_at(chain: Chain, channel: Channel | None, weight: int) -> Boundary:
    """The constants of a region; None for all that i0 connects with the Euclidean one: derived ones only."""
    if channel is not None:
        return boundary_in(chain, channel, weight)
    return chain.boundary(weight) if chain.in_ratios() else chain.ratio_boundary(weight)


def bits_ceiling(digits: int) -> int:
    """The highest working precision before an evaluation gives up."""
    return _BITS_PER_DIGIT * digits + 4000


def form_functions(form: EpsilonForm, boundary: Boundary) -> Functions:
    """The canonical functions of a solved form."""
    if not form.variables:
        return InOneRatio(CanonicalSystem(len(form.transformation), ()))
    if any(form.tags):
        return WithRoots(form, boundary.corner)
    if len(form.variables) == 1:
        return InOneRatio(canonical_system(form))
    return InSeveralRatios(form, boundary.corner)


def place_of(chain: Chain, point: Mapping[str, Fraction]) -> KinematicPoint:
    """A point of the family with the prescriptions of its invariants."""
    family = chain.definition
    signs = chain.signs()
    dimensions = {invariant.name: invariant.dimension for invariant in family.invariants}
    if chain.is_euclidean():
        return kinematic_point(point, signs, family.unit, dimensions, masses(family))
    assert family.unit is not None
    return scattering_point(point, signs, family.unit, dimensions, masses(family))


def _master_rows(
    family: FamilyDefinition, form: EpsilonForm, ratios: Mapping[str, Target], masters: Sequence[Powers]
) -> tuple[Row, ...]:
    exponents = [unit_exponent(family, powers) for powers in masters]
    return master_rows(form, {name: ratio.value for name, ratio in ratios.items()}, masters, exponents)


def _integral_rows(
    chain: Chain,
    table: ReductionTable,
    wanted: Sequence[Powers],
    masters: Sequence[Row],
    place: KinematicPoint,
) -> tuple[Row, ...]:
    family = chain.definition
    unit = Fraction(1)
    if family.unit is not None:
        unit = chain.signs()[family.unit] * place.values[family.unit]
    rows = []
    for powers in wanted:
        combination = dict(table.reductions[powers])
        exponent = unit_exponent(family, powers)
        rows.append(
            integral_row(powers, exponent, combination, masters, family.dimension, place.values, unit)
        )
    return tuple(rows)
