"""Boundary constants that no condition fixes: recognised from values by the auxiliary-mass method."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from fractions import Fraction

import flint

from ibpred.balls.accuracy import bits_for
from ibpred.balls.context import Ball, precision
from ibpred.balls.decimal import ball_of_decimal
from ibpred.boundary.conditions.explore import BoundaryProblem
from ibpred.boundary.conditions.fix import Boundary, Fitted, OpenConstantsError, fix_constants, lowest_orders
from ibpred.boundary.from_values import fitted_constants
from ibpred.boundary.problem import boundary_of_series, one_scale_values, without_closed_form
from ibpred.boundary.recognise import ALTERNATING, SINGLE_SCALE, SIXTH_ROOTS, Fit, recognise_series
from ibpred.epsform.form import EpsilonForm
from ibpred.errors import BoundaryError, UnfinishedError
from ibpred.family.definition import Powers
from ibpred.family.signs import masses
from ibpred.iterated.constants.series import Series, eps_valuation, laurent
from ibpred.iterated.solution import fibration
from ibpred.numerics.forms.channels import is_next_to_corner
from ibpred.run.chain.chain import Chain
from ibpred.run.constants.known_points import KnownPoint, known_points, new_point

DIGITS = (40, 90)
"""Of the values; the next where a constant is not recognised."""

_ONE_SCALE_DIGITS = (*DIGITS, 180)
"""Likewise where no condition helps: masters of mixed weight need many constants."""

ODDS = -12
"""A fit is believed if chance would give one as good once in 10^12."""

_RATIOS = (Fraction(1, 3), Fraction(1, 5), Fraction(1, 7), Fraction(1, 11), Fraction(1, 13))
_SHRINKINGS = 6


def generators_of(chain: Chain) -> tuple[str, ...]:
    """What constants are made of: multiple zeta values, where lines have masses alternating sums as well."""
    return ALTERNATING if masses(chain.definition) else SINGLE_SCALE


def _alphabets(chain: Chain) -> tuple[tuple[str, ...], ...]:
    """Where masses meet at one point, sixth roots of unity may turn up instead of alternating sums."""
    return (ALTERNATING, SIXTH_ROOTS) if masses(chain.definition) else (SINGLE_SCALE,)


def one_scale_boundary(chain: Chain, order: int) -> Boundary:
    """The masters of a family without a ratio through ``eps^order``: closed forms, the rest fitted.

    Raises
    ------
    UnfinishedError
        If a master without a closed form has no values, or is not recognised.
    """
    family, masters, signs = chain.definition, chain.masters().masters, chain.euclidean_signs()
    missing = without_closed_form(family, masters, signs)
    series: dict[Powers, Series] = {}
    fitted: list[Fitted] = []
    if missing:
        chain.progress.stage(f"values of {len(missing)} masters without a closed form")
        point = {name: Fraction(sign) for name, sign in signs.items()}
        for digits in _ONE_SCALE_DIGITS:
            known = values_at(chain, point, order, digits)
            try:
                series, fitted = _recognised(chain, known, missing, order, digits)
                break
            except BoundaryError as error:
                if digits == _ONE_SCALE_DIGITS[-1]:
                    raise error
    exact = one_scale_values(family, masters, signs, order, series)
    return replace(boundary_of_series(exact), fitted=tuple(fitted))


def values_at(chain: Chain, point: Mapping[str, Fraction], order: int, digits: int) -> KnownPoint:
    """The masters at a point, kept from before or computed now."""
    for known in known_points(chain):
        if dict(known.point) == dict(point) and known.order >= order and known.digits >= digits:
            return known
    return new_point(chain, point, order, digits)


def _recognised(
    chain: Chain, known: KnownPoint, missing: Sequence[Powers], order: int, digits: int
) -> tuple[dict[Powers, Series], list[Fitted]]:
    """Masters without a closed form through ``eps^order``, from their values."""
    series: dict[Powers, Series] = {}
    fitted: list[Fitted] = []
    for row, powers in enumerate(chain.masters().masters):
        if powers in missing:
            values = {
                k: flint.acb(ball_of_decimal(v, 2 * bits_for(digits)).real)
                for k, v in known.values[row].items()
                if k <= order
            }
            loops = len(chain.definition.loops)
            series[powers], fits = recognise_series(values, loops, _alphabets(chain), ODDS)
            fitted += _marked(row, series[powers].start, fits)
    return series, fitted


def _marked(row: int, start: int, fits: Sequence[Fit]) -> list[Fitted]:
    return [Fitted(row, start + k, fit) for k, fit in enumerate(fits)]


def completed_by_fits(chain: Chain, problem: BoundaryProblem, complaint: BoundaryError) -> Boundary:
    """Boundary constants of a family with ratios; what the conditions leave open is fitted.

    Parameters
    ----------
    chain
        The family's chain.
    problem
        The problem.
    complaint
        What `fix_constants` said of it; raised again where it is not about open constants, or where functions
        carry square roots, of whose words no values are at hand.

    Raises
    ------
    UnfinishedError
        If open constants have no values, or are not recognised; the message says which and why the
        conditions did not fix them.
    """
    if not isinstance(complaint, OpenConstantsError) or any(problem.form.tags):
        raise complaint
    chain.progress.stage("values for the constants that no condition fixes")
    form = problem.form
    ratios = near_corner(problem)
    values = chain.coordinates().values
    point = {name: value.substitute(dict(ratios)).to_fraction() for name, value in values.items()}
    start = min(lowest_orders(problem))
    needed = max(
        order - eps_valuation(entry) for order, row in complaint.open for entry in form.inverse[row] if entry
    )
    for digits in DIGITS:
        try:
            known = values_at(chain, point, needed, digits)
            bits = 2 * bits_for(digits)
            numbers = [{k: ball_of_decimal(v, bits) for k, v in master.items()} for master in known.values]
            functions = canonical_values(form, ratios, numbers, start, problem.weight, bits)
            fits = fitted_constants(
                problem, complaint, functions, start, ratios, digits, generators_of(chain), ODDS
            )
            return fix_constants(problem, fits, chain.progress)
        except UnfinishedError as error:
            failure = error
            if not isinstance(error, BoundaryError):
                break
    raise BoundaryError(f"{complaint}. A fit from values failed: {failure}") from failure


def near_corner(problem: BoundaryProblem) -> dict[str, Fraction]:
    """Small positive ratios at which the functions are taken.

    Raises
    ------
    UnfinishedError
        If outside a Euclidean region a letter is not linear, or lies between the corner and all points tried.
    """
    form, corner = problem.form, problem.corner
    ratios = dict(zip(form.variables, _RATIOS, strict=False))
    if problem.real:
        return ratios
    levels = [level for level, _ in fibration(form, corner)]
    for shrunk in range(_SHRINKINGS):
        # the first of the corner is to be the smallest
        factors = {name: Fraction(1, 3) ** (shrunk * (len(corner) - k)) for k, name in enumerate(corner)}
        chosen = {name: value * factors[name] for name, value in ratios.items()}
        if is_next_to_corner(levels, chosen):
            return chosen
    raise UnfinishedError(
        f"no point was found between the corner {' << '.join((*corner, '1'))} and the letters "
        f"{', '.join(str(letter) for letter in form.letters)}"
    )


def canonical_values(
    form: EpsilonForm,
    ratios: Mapping[str, Fraction],
    masters: Sequence[Mapping[int, Ball]],
    start: int,
    weight: int,
    bits: int,
) -> list[list[Ball]]:
    """``f = T^-1 I`` at a point: one list for each order from `start` through `weight`."""
    with precision(bits):
        found = [[flint.acb(0)] * len(form.inverse) for _ in range(weight - start + 1)]
        for i, row in enumerate(form.inverse):
            for entry, master in zip(row, masters, strict=True):
                if not entry or not master:
                    continue
                series = laurent(entry.substitute(dict(ratios)), weight - min(master))
                for k, factor in enumerate(series.coefficients):
                    ball = factor.ball(bits)
                    for power, value in master.items():
                        order = series.start + k + power
                        if start <= order <= weight:
                            found[order - start][i] += ball * value
        return found
