"""Constants in a region of scattering, where functions are complex: the massless box at s > 0, t, u < 0.

Its constants there follow from those of the Euclidean region by continuation, s + i0. They are found again
from the closed forms with their phases, from one fit of what is open, and from values of the functions.
"""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import flint
import pytest
from canonical_forms import BOX_MASTERS, X, box_form, diagonal_form, family

from ibpred.balls.context import precision
from ibpred.boundary.conditions.fix import Fitted, OpenConstantsError, fix_constants
from ibpred.boundary.from_values import fitted_constants
from ibpred.boundary.problem import boundary_problem, problem_in_variables
from ibpred.boundary.recognise import SINGLE_SCALE, Fit
from ibpred.epsform.form import EpsilonForm
from ibpred.errors import BoundaryError
from ibpred.iterated.constants.constants import ZERO, Constant
from ibpred.iterated.constants.matrices import exponential, rational_matrix
from ibpred.numerics.forms.back_to_base import constants_at_base
from ibpred.numerics.forms.canonical import canonical_system
from ibpred.numerics.forms.continuation import evaluate_canonical
from ibpred.numerics.forms.masters import unit_factors
from ibpred.numerics.forms.path import Target

HALF_TURN = Constant.generator("I") * Constant.generator("pi")
WEIGHT = 3  # powers of eps; the functions begin at eps^-1
SCATTERING = {"s": X.ring.one, "t": -X}

Vectors = list[tuple[Constant, ...]]


def box_at_positive_s() -> EpsilonForm:
    """In x = -t/s, the unit s > 0: the old ratio t/s is -x."""
    form = box_form()
    turned = {"x": -X}
    return replace(
        form,
        letters=(X, 1 - X),
        transformation=tuple(tuple(e.substitute(turned) for e in row) for row in form.transformation),
        inverse=tuple(tuple(e.substitute(turned) for e in row) for row in form.inverse),
    )


def continued() -> Vectors:
    """``(-s)^-eps = exp(i pi eps) s^-eps`` times ``(t/s)^(eps A_0) = exp(i pi eps A_0) x^(eps A_0)``."""
    signs = {"s": -1, "t": -1}
    known = fix_constants(boundary_problem(family("massless-box"), BOX_MASTERS, box_form(), signs, WEIGHT))
    residue = rational_matrix(box_form().matrices[0])
    size = len(BOX_MASTERS)
    turns = [
        exponential(residue, HALF_TURN, WEIGHT + 1),
        exponential(
            rational_matrix([[Fraction(int(i == j)) for j in range(size)] for i in range(size)]),
            HALF_TURN,
            WEIGHT + 1,
        ),
    ]
    vectors: Vectors = list(known.constants)
    for turn in turns:
        vectors = [
            tuple(
                sum(
                    (
                        Constant.from_terms({monomial: Fraction(int(m[i, j].p), int(m[i, j].q))})
                        * vectors[k - n][j]
                        for n in range(k + 1)
                        for monomial, m in turn.orders[n].items()
                        for j in range(size)
                    ),
                    ZERO,
                )
                for i in range(size)
            )
            for k in range(len(vectors))
        ]
    return vectors


def problem(weight: int = WEIGHT):  # type: ignore[no-untyped-def]
    return problem_in_variables(
        family("massless-box"), BOX_MASTERS, box_at_positive_s(), SCATTERING, weight, False
    )


def bare_problem():  # type: ignore[no-untyped-def]
    """Without what is known of the box itself."""
    whole = problem()
    return replace(whole, masters=tuple(replace(m, behaviours={}) for m in whole.masters))


def test_behaviour_on_its_own_sheet_fixes_the_box() -> None:
    """F of the box is positive at s, t < 0: x = 0 borders on that, x = 1 lies beyond, at t/s = -1."""
    box = problem().masters[2]
    assert {region.exponent.slope for region in box.behaviours[Fraction(0)]} == {
        (Fraction(0),),
        (Fraction(-1),),
    }
    assert [region.exponent.slope for region in box.behaviours[Fraction(1)]] == [(Fraction(0),)]
    assert list(fix_constants(problem()).constants) == continued()


def test_closed_forms_fix_their_functions_with_phases() -> None:
    expected = continued()
    with pytest.raises(OpenConstantsError) as caught:
        fix_constants(bare_problem())
    for k in range(WEIGHT + 2):
        for row in (0, 1):
            assert caught.value.known[k - 1, row] == expected[k][row]
    assert {row for _, row in caught.value.open} == {2}


def test_complex_fits_are_taken() -> None:
    expected = continued()
    fits = [Fitted(2, k - 1, Fit(vector[2], 40, -30)) for k, vector in enumerate(expected)]
    boundary = fix_constants(bare_problem(), fits)
    assert boundary.start == -1
    assert list(boundary.constants) == expected
    wrong = Fitted(0, 1, Fit(expected[2][0] + HALF_TURN**2, 40, -30))
    with pytest.raises(BoundaryError, match="contradicts"):
        fix_constants(bare_problem(), [*fits, wrong])


def values(target: Target, bits: int):  # type: ignore[no-untyped-def]
    constants = tuple(tuple(c.ball(bits) for c in vector) for vector in continued())
    return evaluate_canonical(canonical_system(box_at_positive_s()), constants, target, bits)


def test_constants_are_recognised_from_complex_values() -> None:
    x = Fraction(1, 3)
    with pytest.raises(OpenConstantsError) as caught:
        fix_constants(bare_problem())
    here = values(Target(x, 0), 300)
    fits = fitted_constants(bare_problem(), caught.value, here, -1, {"x": x}, 40, SINGLE_SCALE, -12)
    assert list(fix_constants(bare_problem(), fits).constants) == continued()


REGIONS = (Target(Fraction(3), 0), Target(Fraction(1, 2), 1), Target(Fraction(2, 3), 0))


@pytest.mark.parametrize("target", REGIONS)
def test_constants_are_recognised_from_any_region(target: Target) -> None:
    system = canonical_system(box_at_positive_s())
    constants, fits = constants_at_base(system, values(target, 300), target, SINGLE_SCALE, -12, 40, 300)
    assert list(constants) == continued()
    assert max(fit.odds for line in fits for fit in line) <= -12


def test_what_is_no_such_constant_is_told() -> None:
    target = Target(Fraction(1, 3), 0)
    here = [list(vector) for vector in values(target, 300)]
    here[2][2] += Constant.read("log2^2").ball(300) / 7
    system = canonical_system(box_at_positive_s())
    with pytest.raises(BoundaryError, match="canonical function 3 at relative order 2"):
        constants_at_base(system, here, target, SINGLE_SCALE, -12, 40, 300)


def crossed_box():  # type: ignore[no-untyped-def]
    """The box with legs t and u at s = 1, t = -x, u = x - 1: real, the letters x and 1 - x."""
    first, second = (rational_matrix(m) for m in box_form().matrices)
    unit = rational_matrix([[Fraction(int(i == j)) for j in range(3)] for i in range(3)])
    # t^-eps times a function of u/t
    residues = (-unit - first - second, first)
    matrices = tuple(
        tuple(tuple(Fraction(int(m[i, j].p), int(m[i, j].q)) for j in range(3)) for i in range(3))
        for m in residues
    )
    eps = X.ring.variable("eps")
    factors = (1 - 2 * eps, 1 - 2 * eps, eps * X * (1 - X))
    form = diagonal_form(factors, (X, 1 - X), matrices)
    values = {"s": -X, "t": X - 1}
    return problem_in_variables(family("massless-box"), BOX_MASTERS, form, values, WEIGHT, False)


def test_the_far_side_fixes_a_crossed_box() -> None:
    """Nothing happens where s = 0, beyond both letters: minus infinity of the ratio -t/s."""
    boundary = fix_constants(crossed_box())
    assert boundary.start == -1
    x, bits = Fraction(1, 3), 200
    here = evaluate_canonical(
        canonical_system(crossed_box().form),
        tuple(tuple(c.ball(bits) for c in vector) for vector in boundary.constants),
        Target(x, 0),
        bits,
    )
    usual = fix_constants(
        boundary_problem(family("massless-box"), BOX_MASTERS, box_form(), {"s": -1, "t": -1}, WEIGHT)
    )
    there = evaluate_canonical(
        canonical_system(box_form()),
        tuple(tuple(c.ball(bits) for c in vector) for vector in usual.constants),
        Target((1 - x) / x, 0),
        bits,
    )
    with precision(bits):
        factors = unit_factors(Target(x, 0), (Fraction(0), Fraction(-1)), len(there), bits)
        for k, vector in enumerate(here):
            for row, value in enumerate(vector):
                expected = sum((factors[n] * there[k - n][row] for n in range(k + 1)), flint.acb(0))
                assert value.overlaps(expected)
                assert expected.rad() < 1e-40
