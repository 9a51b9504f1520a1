from __future__ import annotations

from canonical_forms import (
    BOX_MASTERS,
    DOUBLE_BOX_MASTERS,
    LEG_BOX_MASTERS,
    box_form,
    double_box_form,
    family,
    leg_box_form,
)

from ibpred.boundary.conditions.fix import fix_constants
from ibpred.boundary.problem import boundary_problem
from ibpred.iterated.constants.constants import Constant
from ibpred.iterated.solution import Solution, length, solve_orders
from ibpred.iterated.weights import Excess, weight_excesses


def test_boxes_stay_within_the_bound() -> None:
    for name, masters, form, loops in (
        ("massless-box", BOX_MASTERS, box_form(), 1),
        ("planar-double-box", DOUBLE_BOX_MASTERS, double_box_form(), 2),
    ):
        signs = {"s": -1, "t": -1}
        boundary = fix_constants(boundary_problem(family(name), masters, form, signs, 4))
        solution = solve_orders(form, boundary.corner, boundary.constants, 4, boundary.start)
        assert weight_excesses(form.transformation, solution, loops) == ()
        # with one loop fewer the last box is beyond: its double pole would be of weight 2
        found = weight_excesses(form.transformation, solution, loops - 1)
        assert Excess(len(masters) - 1, 0, 2 * loops, 2 * loops - 2) in found


def test_several_ratios() -> None:
    form, signs = leg_box_form(), {"s": -1, "t": -1, "p4sq": -1}
    boundary = fix_constants(boundary_problem(family("box-one-leg"), LEG_BOX_MASTERS, form, signs, 2))
    solution = solve_orders(form, boundary.corner, boundary.constants, 2, boundary.start)
    assert weight_excesses(form.transformation, solution, 1) == ()


def test_a_constant_of_too_high_weight_is_named() -> None:
    form = box_form()
    heavy = Constant.read("zeta3")
    solution = Solution((), 0, ((((((),), heavy),), (), ()),))
    assert weight_excesses(form.transformation, solution, 1) == (Excess(0, 0, 3, 2),)
    assert length(((0, 1), (), (2,))) == 3
