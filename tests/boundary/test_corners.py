from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import flint
import pytest
from canonical_forms import LEG_BOX_MASTERS, TWO, family, leg_box_form
from mpmath import euler, exp, gamma, log, mp, mpf, pi, polylog, taylor

from ibpred.boundary.conditions.edges import edges_at
from ibpred.boundary.conditions.eigen import joint_spaces
from ibpred.boundary.conditions.explore import BoundaryProblem
from ibpred.boundary.conditions.fix import fix_constants
from ibpred.boundary.problem import boundary_problem, problem_in_variables, region_values
from ibpred.errors import BoundaryError, InputError
from ibpred.iterated.constants.matrices import identity, rational_matrix
from ibpred.iterated.solution import fibration, linear_corner, product_text, solve_orders
from ibpred.iterated.solution_values import solution_values

SIGNS = {"s": -1, "t": -1, "p4sq": -1}


def problem(weight: int) -> BoundaryProblem:
    return boundary_problem(family("box-one-leg"), LEG_BOX_MASTERS, leg_box_form(), SIGNS, weight)


def box(x: mpf, y: mpf) -> list[mpf]:
    """eps^2 s t times the box through eps^2 (Bern, Dixon, Kosower, hep-ph/9306240; from memory)."""

    def factor(eps: mpf) -> mpf:
        return exp(eps * euler) * gamma(1 + eps) * gamma(1 - eps) ** 2 / gamma(1 - 2 * eps)

    finite = -2 * polylog(2, 1 - y) - 2 * polylog(2, 1 - y / x) - log(x) ** 2 - pi**2 / 3

    def whole(eps: mpf) -> mpf:
        return factor(eps) * (2 * (1 + x**-eps - y**-eps) + eps**2 * finite)

    return [mp.re(v) for v in taylor(whole, 0, 2)]


def test_the_box_with_one_leg_off_its_mass_shell() -> None:
    boundary = fix_constants(problem(2))
    assert boundary.corner == ("y", "x")
    assert [str(v[3]) for v in boundary.constants] == ["2", "0", "-7*pi^2/6", "-20*zeta3/3"]
    assert sum(e.confirming for e in boundary.evidence) > 5
    assert any("y/x = 1" in e.condition for e in boundary.evidence)
    solution = solve_orders(leg_box_form(), boundary.corner, boundary.constants, 2, boundary.start)
    # both sides of the walls y = x and y = 1, at which single polylogarithms are cut but the box is regular
    for x, y in (("1/3", "1/5"), ("1/3", "1/2"), ("1/3", "5/2"), ("4", "3")):
        point = {"x": Fraction(x), "y": Fraction(y)}
        values = solution_values(solution, point, 30)
        with mp.workdps(40):
            expected = box(*(mpf(v.numerator) / v.denominator for v in point.values()))
            for k in range(3):
                ball = values[k][3]
                assert abs(mpf(ball.real.str(35, radius=False)) - expected[k]) < 1e-25
                assert ball.imag.contains(0)
                assert abs(float(ball.imag.abs_upper())) < 1e-28


def test_any_corner_gives_the_same_function() -> None:
    """Constants at x << y and at y << x, solved in their own order of the ratios."""
    point = {"x": Fraction(2, 7), "y": Fraction(3, 5)}
    found = []
    for corner in (("x", "y"), ("y", "x")):
        boundary = fix_constants(replace(problem(2), corner=corner))
        solution = solve_orders(leg_box_form(), corner, boundary.constants, 2, boundary.start)
        found.append(solution_values(solution, point, 40))
    for one, other in zip(*found, strict=True):
        for left, right in zip(one, other, strict=True):
            assert left.overlaps(right)


def test_levels_of_the_fibration() -> None:
    form = leg_box_form()
    assert linear_corner(form) == ("y", "x")
    levels = [level for level, _ in fibration(form, ("y", "x"))]
    x = TWO.variable("x")
    assert set(levels[0].roots()) == {TWO.zero, TWO.one, x, x + 1}
    assert set(levels[1].roots()) == {TWO.zero, -TWO.one}
    one, where = levels[0].roots().index(TWO.one), levels[1].roots().index(TWO.zero)
    assert product_text(((one,), (where,)), levels) == "G(1;y)*G(0;x)"
    with pytest.raises(InputError, match="corner"):
        fibration(form, ("x",))


def test_edges_of_the_box() -> None:
    outer, inner = edges_at(leg_box_form(), ("y", "x"))
    assert outer.end is None
    assert set(outer.residues) == {Fraction(0), Fraction(-1)}
    assert inner.end == ("x", "y")
    assert inner.label == "y/x"
    assert set(inner.residues) == {Fraction(0), Fraction(1)}


def test_a_wrong_residue_is_noticed() -> None:
    right = problem(2)
    letter = right.form.letters.index(TWO.variable("y") - 1)
    rows = [list(row) for row in right.form.matrices[letter]]
    rows[3][0], rows[3][1] = rows[3][1], rows[3][0]
    matrices = list(right.form.matrices)
    matrices[letter] = tuple(map(tuple, rows))
    with pytest.raises(BoundaryError, match=r"contradict|not integrable"):
        fix_constants(replace(right, form=replace(right.form, matrices=tuple(matrices))))


def test_nothing_known_is_said() -> None:
    right = problem(0)
    masters = (*right.masters[:3], replace(right.masters[3], powers=None))
    with pytest.raises(BoundaryError, match=r"function 4 \(box-one-leg\(1,1,1,1\)\)"):
        fix_constants(replace(right, masters=masters))


def test_the_corner_must_fit() -> None:
    with pytest.raises(InputError, match="corner"):
        fix_constants(replace(problem(0), corner=("x",)))


def test_a_change_of_variables() -> None:
    """The same constants from the form in y = x z: its corner is z << x."""
    form = leg_box_form()
    moved = {"y": TWO.variable("x") * TWO.variable("y")}
    extra = form.letters.index(TWO.variable("y"))
    letters, matrices = [], []
    for letter, matrix in zip(form.letters, form.matrices, strict=True):
        letters.append(letter.substitute(moved))
        matrices.append(matrix)
    del extra
    changed = replace(
        form,
        letters=tuple(letters),
        matrices=tuple(matrices),
        transformation=tuple(tuple(e.substitute(moved) for e in row) for row in form.transformation),
        inverse=tuple(tuple(e.substitute(moved) for e in row) for row in form.inverse),
    )
    values = region_values(family("box-one-leg"), SIGNS, TWO, ("x", "y"))
    values = {name: v.substitute(moved) for name, v in values.items()}
    other = problem_in_variables(family("box-one-leg"), LEG_BOX_MASTERS, changed, values, 2, True)
    assert fix_constants(other).constants == fix_constants(problem(2)).constants


def test_joint_spaces() -> None:
    first = rational_matrix([[Fraction(v) for v in row] for row in ((1, 1, 0), (0, 1, 0), (0, 0, 2))])
    second = rational_matrix([[Fraction(v) for v in row] for row in ((3, 0, 0), (0, 3, 0), (0, 0, 3))])
    spaces = joint_spaces([first, second])
    assert [s.values for s in spaces] == [(1, 3), (2, 3)]
    assert spaces[0].projector + spaces[1].projector == identity(3)
    assert [set(factors) for factors, _ in spaces[0].nilpotents] == [{0}]
    with pytest.raises(BoundaryError, match="commute"):
        joint_spaces([first, flint.fmpq_mat(3, 3, [0, 0, 0, 1, 0, 0, 0, 0, 0])])
