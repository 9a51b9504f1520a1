from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from pathlib import Path

import flint
import pytest
from canonical_forms import LEG_BOX_MASTERS, family, leg_box_form
from hypothesis import given, settings
from hypothesis import strategies as st

from ibpred.balls.context import precision, widened
from ibpred.balls.decimal import ball_of_decimal
from ibpred.boundary.conditions.fix import Fitted, OpenConstantsError, fix_constants
from ibpred.boundary.from_values import fitted_constants
from ibpred.boundary.problem import boundary_problem, one_scale_values, without_closed_form
from ibpred.boundary.recognise import (
    ALTERNATING,
    SINGLE_SCALE,
    SIXTH_ROOTS,
    Fit,
    basis_of_weights,
    recognise,
    recognise_series,
)
from ibpred.errors import BoundaryError
from ibpred.exact.codec import from_data, to_data
from ibpred.iterated.constants.constants import Constant
from ibpred.iterated.constants.series import Series
from ibpred.iterated.polylogs.polylog_values import Place, polylog
from ibpred.iterated.solution import solve_orders
from ibpred.iterated.solution_values import solution_values
from ibpred.progress import Silent
from ibpred.run.chain.chain import Chain
from ibpred.run.constants.solved import completed_boundary
from ibpred.run.storage.store import Store
from ibpred.run.values.evaluate import evaluate

rationals = st.fractions(min_value=-30, max_value=30, max_denominator=120)


def blurred(constant: Constant, digits: int) -> flint.acb:
    ball = constant.ball(4 * digits + 60)
    return widened(ball, flint.arb(10) ** (-digits), 4 * digits + 60)


@settings(max_examples=25, deadline=None)
@given(st.lists(rationals, min_size=4, max_size=4), st.integers(0, 4))
def test_what_is_put_in_comes_out(coefficients: list[Fraction], weight: int) -> None:
    basis = basis_of_weights((weight,), SINGLE_SCALE, False)
    exact = Constant.from_terms(dict(zip(basis, coefficients, strict=False)))
    value = blurred(exact, 60)
    if exact:
        value = flint.acb(value.real, 0)
    fit = recognise(flint.acb(value.real), (weight,), SINGLE_SCALE, -20)
    if basis:
        assert fit is not None
        assert fit.constant == exact
        assert fit.digits in (59, 60)


def test_both_parts() -> None:
    exact = Constant.read("7*zeta3/3 - I*pi^3/6")
    fit = recognise(blurred(exact, 40), (3,), SINGLE_SCALE, -15)
    assert fit is not None
    assert fit.constant == exact
    assert fit.odds < -25


def test_an_alternating_sum_from_its_value() -> None:
    """G(-1, 0, 1, 1; 1) of weight four, from its series; the tables of double shuffle say the same."""
    value = polylog([Place(Fraction(a)) for a in (-1, 0, 1, 1)], Place(Fraction(1)), 70)
    fit = recognise(flint.acb(value.real), (4,), ALTERNATING, -20)
    assert fit is not None
    assert fit.constant.ball(300).overlaps(value)
    assert fit.constant.weights() == {4}


def test_three_equal_masses_in_the_vacuum(tmp_path: Path) -> None:
    """Davydychev, Tausk, Nucl. Phys. B 397 (1993) 123, with the Clausen function at pi/3.

    ``-3/2 Gamma(1+e)^2 (1/e^2 + 3/e + 7 - 4/sqrt3 Cl2(pi/3)) + O(e)`` (from memory).
    """
    with Store(tmp_path) as store:
        boundary = completed_boundary(Chain(family("vacuum-one-mass"), store, Silent(), 1), 0)
    assert boundary.start == -2
    assert [str(vector[1]) for vector in boundary.constants] == [
        "-3/2",
        "-9/2",
        "2*sqrt3*clausen2 - pi^2/4 - 21/2",
    ]
    assert all(item.fit.odds < -20 for item in boundary.fitted)


@pytest.mark.slow
def test_the_vacuum_graph_with_distinct_masses_at_equal_ones(tmp_path: Path) -> None:
    """Its solution is derived, and continued to the point where the Kallen root is imaginary."""
    with Store(tmp_path) as store:
        chain = Chain(family("vacuum-distinct-masses"), store, Silent(), 1)
        assert not chain.boundary(4).fitted
        point = {name: Fraction(1) for name in ("m1sq", "m2sq", "m3sq")}
        value = evaluate(chain, point, ((1, 1, 1),), 0, 30)[0]
    assert value.certified
    exact = Constant.read("2*sqrt3*clausen2 - pi^2/4 - 21/2").ball(200)
    assert ball_of_decimal(value.epsilon[0], 200).overlaps(exact)


def test_mixed_weights_and_square_roots() -> None:
    exact = Constant.read("sqrt3*pi^3/6 - 2*sqrt3*log3*clausen2 + 3*sqrt3*logsine3 + zeta3 - 45/2")
    fit = recognise(flint.acb(blurred(exact, 90).real), (3, 2, 1, 0), SIXTH_ROOTS, -15)
    assert fit is not None
    assert fit.constant == exact


def test_numbers_that_are_no_such_constants_are_left_alone() -> None:
    with precision(400):
        stranger = flint.acb(flint.arb(1) / 3).gamma()
        assert recognise(widened(stranger, flint.arb(10) ** -50, 400), (4,), SINGLE_SCALE, -10) is None
        # too few digits: a relation is found but chance would do as well
        few = widened(Constant.read("355*zeta3/113").ball(200), flint.arb(10) ** -6, 200)
        assert recognise(flint.acb(few.real), (3, 2, 0), SINGLE_SCALE, -10) is None
        assert recognise(flint.acb(flint.arb(1, 10)), (3,), SINGLE_SCALE, -10) is None


def test_fits_stand_in_for_what_stays_open() -> None:
    """Without its conditions the box is open; its constants from values give the same, and are marked."""
    form = leg_box_form()
    right = boundary_problem(family("box-one-leg"), LEG_BOX_MASTERS, form, {"s": -1, "t": -1, "p4sq": -1}, 2)
    derived = fix_constants(right)
    blind = replace(right, masters=(*right.masters[:3], replace(right.masters[3], powers=None)))
    fits = []
    for k, vector in enumerate(derived.constants):
        fit = recognise(flint.acb(blurred(vector[3], 50).real), (k,), SINGLE_SCALE, -15)
        assert fit is not None
        fits.append(Fitted(3, derived.start + k, fit))
    found = fix_constants(blind, fits)
    assert found.constants == derived.constants
    assert found.fitted == tuple(fits)
    assert from_data(type(found), to_data(found)) == found
    wrong = [replace(fits[0], fit=Fit(Constant.rational(3), 50, -30)), *fits[1:]]
    with pytest.raises(BoundaryError, match="fit of canonical function 4"):
        fix_constants(right, wrong)
    with pytest.raises(BoundaryError, match="undetermined"):
        fix_constants(blind, fits[:-1])


def test_laurent_coefficients_with_mixed_weights() -> None:
    """The massless two-loop sunrise from its numbers: its closed form says the same."""
    powers, definition = (1, 1, 1, 0, 0), family("sunrise")
    (exact,) = one_scale_values(definition, (powers,), {"s": -1}, 3)
    values = {k: flint.acb(blurred(exact.coefficient(k), 120).real) for k in range(exact.start, 4)}
    series, fits = recognise_series(values, 2, [SINGLE_SCALE], -15)
    assert series == exact
    assert all(fit.odds <= -15 for fit in fits)
    values[2] = flint.acb(flint.arb(values[2].real.str(12, radius=False)) + flint.arb(0, flint.arb("1e-12")))
    with pytest.raises(BoundaryError, match=r"eps\^2"):
        recognise_series(values, 2, [SINGLE_SCALE], -15)


def test_fitted_masters_take_the_place_of_closed_forms() -> None:
    """Crossed vertex with six lines, as in Gonsalves, Phys. Rev. D 28 (1983) 1542 (from memory)."""
    definition, signs = family("crossed-vertex"), {"s": -1}
    six = (1, 1, 1, 1, 1, 1, 0)
    assert without_closed_form(definition, (six,), signs) == (six,)
    with pytest.raises(BoundaryError, match="Gamma"):
        one_scale_values(definition, (six,), signs, 0)
    known = Series(-4, tuple(Constant.read(t) for t in ("1", "0", "-pi^2", "-83*zeta3/3", "-59*pi^4/120")))
    assert one_scale_values(definition, (six,), signs, 0, {six: known}) == (known,)


def test_constants_from_values_at_a_point() -> None:
    """The blind box once more, from values of its canonical functions at x = 1/3, y = 1/5."""
    form = leg_box_form()
    right = boundary_problem(family("box-one-leg"), LEG_BOX_MASTERS, form, {"s": -1, "t": -1, "p4sq": -1}, 2)
    derived = fix_constants(right)
    solution = solve_orders(form, derived.corner, derived.constants, 2, derived.start)
    point = {"x": Fraction(1, 3), "y": Fraction(1, 5)}
    values = solution_values(solution, point, 50)
    blind = replace(right, masters=(*right.masters[:3], replace(right.masters[3], powers=None)))
    with pytest.raises(OpenConstantsError, match="undetermined") as caught:
        fix_constants(blind)
    complaint = caught.value
    assert {row for _, row in complaint.open} == {3}
    fits = fitted_constants(blind, complaint, values, derived.start, point, 50, SINGLE_SCALE, -12)
    found = fix_constants(blind, fits)
    assert found.constants == derived.constants
    assert {item.row for item in found.fitted} == {3}
    shifted = [list(row) for row in values]
    shifted[2][3] = shifted[2][3] + flint.acb(flint.arb("0.1234567"))
    with pytest.raises(BoundaryError, match=r"function 4 .* at eps\^1"):
        fitted_constants(blind, complaint, shifted, derived.start, point, 50, SINGLE_SCALE, -12)
