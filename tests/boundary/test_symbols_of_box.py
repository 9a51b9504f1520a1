from __future__ import annotations

from canonical_forms import LEG_BOX_MASTERS, TWO, family, leg_box_form

from ibpred.boundary.conditions.fix import fix_constants
from ibpred.boundary.problem import boundary_problem
from ibpred.iterated.solution import solve_orders
from ibpred.iterated.symbol import is_integrable, symbol_of_function, symbols_of_form

SIGNS = {"s": -1, "t": -1, "p4sq": -1}


def test_the_box_by_two_routes() -> None:
    """The symbol from the alphabet alone and from the polylogarithms agree, and it is integrable."""
    form = leg_box_form()
    boundary = fix_constants(boundary_problem(family("box-one-leg"), LEG_BOX_MASTERS, form, SIGNS, 2))
    solution = solve_orders(form, boundary.corner, boundary.constants, 2, boundary.start)
    leading = [c.to_fraction() for c in boundary.constants[0]]
    x, y = TWO.variable("x"), TWO.variable("y")
    for length in (1, 2, 3):
        by_form = symbols_of_form(form, leading, length)
        for row, symbol in enumerate(by_form):
            assert symbol == symbol_of_function(solution.orders[length][row], solution.levels)
            assert is_integrable(symbol, ("x", "y"))
        # discontinuities on the first sheet only in the three channels
        assert set(by_form[3].first_entries()) <= {x, y}
