from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import pytest
from canonical_forms import (
    BOX_MASTERS,
    DOUBLE_BOX_MASTERS,
    EPS,
    FIELD,
    X,
    box_form,
    double_box_form,
    family,
)
from mpmath import euler, exp, gamma, hyp2f1, mp, mpf, taylor
from numeric_words import series_value

from ibpred.boundary.conditions.eigen import eigenspaces
from ibpred.boundary.conditions.fix import fix_constants
from ibpred.boundary.problem import boundary_problem, one_scale_values
from ibpred.epsform.form import EpsilonForm
from ibpred.errors import BoundaryError, InputError, UnfinishedError
from ibpred.exact.codec import from_data, to_data
from ibpred.iterated.constants.matrices import identity, rational_matrix
from ibpred.iterated.solution import Solution, solve_orders

SIGNS = {"s": -1, "t": -1}


def number(solution: Solution, order: int, row: int, x: mpf) -> mpf:
    roots = [root.to_fraction() for root in solution.levels[0].roots() if root is not None]
    total = mpf(0)
    for (word,), constant in solution.orders[order - solution.start][row]:
        total += mpf(complex(constant.ball(60)).real) * series_value([roots[letter] for letter in word], x)
    return total


def test_massless_box_against_its_hypergeometric_form() -> None:
    """``2 c_Gamma/(eps^2 s t) [(-t)^-eps F(1+t/s) + (-s)^-eps F(1+s/t)]`` (hep-ph/9306240)."""
    boundary = fix_constants(boundary_problem(family("massless-box"), BOX_MASTERS, box_form(), SIGNS, 4))
    assert boundary.start == -1
    assert boundary.unused == ()
    assert any(e.confirming for e in boundary.evidence)
    solution = solve_orders(box_form(), boundary.corner, boundary.constants, 3, boundary.start)
    assert solution.is_pure()
    assert solution.weight_excess() == 0
    with mp.workdps(30):
        x = mpf(1) / 3

        def eps_times_f(eps: mpf) -> mpf:
            factor = exp(eps * euler) * gamma(1 + eps) * gamma(1 - eps) ** 2 / gamma(1 - 2 * eps)
            pieces = [x**-eps * hyp2f1(1, -eps, 1 - eps, 1 + x), hyp2f1(1, -eps, 1 - eps, 1 + 1 / x)]
            # on the cut; the imaginary parts of the two cancel for the true prescription
            return 2 * factor * sum(mp.re(piece) for piece in pieces)

        expected = taylor(eps_times_f, 0, 4)
        for k, coefficient in enumerate(expected):
            assert abs(number(solution, k - 1, 2, x) - coefficient) < 1e-8


def test_planar_double_box() -> None:
    """Smirnov, hep-ph/9905323: 4, 0, -5 pi^2/2, -65 zeta3/3, -29 pi^4/30 at log x -> 0 (from memory)."""
    boundary = fix_constants(
        boundary_problem(family("planar-double-box"), DOUBLE_BOX_MASTERS, double_box_form(), SIGNS, 4)
    )
    assert boundary.start == 0
    seventh = [str(vector[6]) for vector in boundary.constants]
    assert seventh == ["4", "0", "-5*pi^2/2", "-65*zeta3/3", "-29*pi^4/30"]
    assert sum(e.confirming for e in boundary.evidence) > 50
    solution = solve_orders(double_box_form(), boundary.corner, boundary.constants, 4)
    assert solution.weight_excess() == 0
    assert solution.is_pure()
    # -5 log x at first order, then (4/2!) log^2 x
    assert [(w, str(c)) for w, c in solution.orders[1][6]] == [(((0,),), "-5")]


def test_bubble_with_one_mass() -> None:
    """Against Gamma(eps)/(1-eps) 2F1(1, eps; 2-eps; -x), x = -s/m^2; nothing is used at the threshold."""
    zero, one = FIELD.zero, FIELD.one
    inverse = ((1 - EPS, zero), ((EPS - 1) / (X + 1), X * (1 - 2 * EPS) / (X + 1)))
    forward = ((1 / (1 - EPS), zero), (one / (X * (1 - 2 * EPS)), (X + 1) / (X * (1 - 2 * EPS))))
    at_zero = ((Fraction(0), Fraction(0)), (Fraction(1), Fraction(1)))
    at_threshold = ((Fraction(0), Fraction(0)), (Fraction(-1), Fraction(-2)))
    form = EpsilonForm(("x",), FIELD, (X, X + 1), (at_zero, at_threshold), forward, inverse, ((), ()))
    signs = {"s": -1, "m2": 1}
    boundary = fix_constants(boundary_problem(family("bubble-one-mass"), ((0, 1), (1, 1)), form, signs, 3))
    solution = solve_orders(form, boundary.corner, boundary.constants, 3, boundary.start)
    with mp.workdps(30):
        x = mpf(1) / 3

        def eps_times_f(eps: mpf) -> mpf:
            factor = exp(eps * euler) * gamma(1 + eps)
            tadpole = factor / (eps - 1)
            bubble = factor / (1 - eps) * hyp2f1(1, eps, 2 - eps, -x)
            return ((eps - 1) * tadpole + x * (1 - 2 * eps) * bubble) / (x + 1)

        for k, coefficient in enumerate(taylor(eps_times_f, 0, 4)):
            assert abs(number(solution, k - 1, 1, x) - coefficient) < 1e-8


def test_a_wrong_sign_is_contradicted() -> None:
    with pytest.raises(BoundaryError, match="contradicts"):
        fix_constants(boundary_problem(family("massless-box"), BOX_MASTERS, box_form(-1), SIGNS, 3))


def test_a_wrong_closed_form_is_noticed() -> None:
    problem = boundary_problem(family("massless-box"), BOX_MASTERS, box_form(), SIGNS, 3)
    first, second, third = problem.masters
    swapped = replace(problem, masters=(second, first, third))
    with pytest.raises(BoundaryError, match="is wrong"):
        fix_constants(swapped)


def test_open_constants_are_named() -> None:
    problem = boundary_problem(family("massless-box"), BOX_MASTERS, box_form(), SIGNS, 1)
    third = replace(problem.masters[2], powers=None)
    with pytest.raises(BoundaryError, match=r"canonical function 3 \(massless-box\(1,1,1,1\)\) at eps\^-1"):
        fix_constants(replace(problem, masters=(*problem.masters[:2], third)))


def test_ratios_must_fit_the_family() -> None:
    form = replace(box_form(), variables=("x", "y"))
    with pytest.raises(InputError, match="1 ratios, not 2"):
        boundary_problem(family("massless-box"), BOX_MASTERS, form, SIGNS, 1)


def test_the_result_is_stored_exactly() -> None:
    boundary = fix_constants(boundary_problem(family("massless-box"), BOX_MASTERS, box_form(), SIGNS, 2))
    assert from_data(type(boundary), to_data(boundary)) == boundary


def test_eigenspaces_split_the_space() -> None:
    rows = ((1, 1, 0, 0), (0, 1, 0, 0), (2, 0, 0, 2), (0, 0, 1, 0))
    matrix = rational_matrix([[Fraction(v) for v in row] for row in rows])
    spaces = eigenspaces(matrix)
    assert [space.value for space in spaces] == [1, None]
    assert len(spaces[0].chain) == 2
    total = spaces[0].chain[0] + spaces[1].chain[0]
    assert total == identity(4)
    for space in spaces:
        assert space.chain[0] * space.chain[0] == space.chain[0]
        assert space.chain[0] * matrix == matrix * space.chain[0]


def test_integrals_with_cut_lines_have_no_values() -> None:
    """The box with three cut lines is fixed by nothing: not by the behaviour of the box without cuts."""
    box = family("massless-box")
    cut = replace(box, lines=tuple(replace(line, cut=k < 3) for k, line in enumerate(box.lines)))
    with pytest.raises(UnfinishedError, match=r"line 1 \(k\) is cut"):
        boundary_problem(cut, BOX_MASTERS, box_form(), SIGNS, 4)
    with pytest.raises(UnfinishedError, match="is cut"):
        one_scale_values(cut, BOX_MASTERS, SIGNS, 0)
