from __future__ import annotations

from fractions import Fraction

import pytest
from mpmath import mp, mpf
from numeric_words import series_value

from ibpred.epsform.form import EpsilonForm
from ibpred.errors import BoundaryError, InputError
from ibpred.exact.rational import ring
from ibpred.iterated.constants.constants import Constant
from ibpred.iterated.solution import Solution, function_text, letter_roots, linear_corner, solve_orders

FIELD = ring(("eps", "x"))
X = FIELD.variable("x")


def two_by_two() -> EpsilonForm:
    one, zero = FIELD.one, FIELD.zero
    unit = ((one, zero), (zero, one))
    at_zero = ((Fraction(0), Fraction(0)), (Fraction(2), Fraction(-1)))
    at_minus_one = ((Fraction(0), Fraction(0)), (Fraction(-2), Fraction(1)))
    return EpsilonForm(("x",), FIELD, (X, X + 1), (at_zero, at_minus_one), unit, unit, ((), ()))


def constants(*rows: tuple[str, str]) -> list[tuple[Constant, ...]]:
    return [tuple(Constant.read(text) for text in row) for row in rows]


def value(solution: Solution, order: int, row: int, x: mpf) -> mpf:
    roots = [root.to_fraction() for root in solution.levels[0].roots() if root is not None]
    total = mpf(0)
    for (word,), constant in solution.orders[order][row]:
        arguments = [roots[letter] for letter in word]
        total += mpf(complex(constant.ball(60)).real) * series_value(arguments, x)
    return total


def test_orders_obey_the_differential_equation() -> None:
    form = two_by_two()
    solution = solve_orders(
        form, ("x",), constants(("1", "1"), ("0", "0"), ("pi^2", "-pi^2/6"), ("0", "zeta3")), 3
    )
    with mp.workdps(25):
        x = mpf(1) / 3
        for k in range(1, 4):
            for i in range(2):
                slope = mp.diff(lambda u, k=k, i=i: value(solution, k, i, u), x)
                right = mpf(0)
                for root, matrix in zip((0, -1), form.matrices, strict=True):
                    for j in range(2):
                        entry = matrix[i][j]
                        right += (
                            mpf(entry.numerator)
                            / entry.denominator
                            * value(solution, k - 1, j, x)
                            / (x - root)
                        )
                assert abs(slope - right) < 1e-12


def test_weights_and_text() -> None:
    pure = solve_orders(two_by_two(), ("x",), constants(("1", "1"), ("0", "0"), ("pi^2", "-pi^2/6")), 2)
    assert pure.is_pure()
    assert pure.weight_excess() == 0
    assert linear_corner(two_by_two()) == ("x",)
    assert pure.levels[0].letters == (X, X + 1)
    assert function_text(pure.orders[1][1], pure.levels) == "G(0;x) - G(-1;x)"
    assert function_text(pure.orders[2][1], pure.levels).startswith("-pi^2/6 - G(0,0;x) + G(0,-1;x)")
    assert function_text(pure.orders[1][0], pure.levels) == "0"
    mixed = solve_orders(two_by_two(), ("x",), constants(("1", "1"), ("3", "0")), 1)
    assert not mixed.is_pure()
    assert mixed.weight_excess() == 0
    heavy = solve_orders(two_by_two(), ("x",), constants(("pi^2", "0")), 0)
    assert heavy.weight_excess() == 2


def test_letters_that_are_not_linear_have_no_root() -> None:
    assert letter_roots((X, 2 * X - 3, X * X + 1), "x") == (0, Fraction(3, 2), None)


def test_missing_orders_are_named() -> None:
    with pytest.raises(BoundaryError, match=r"reach eps\^1, but eps\^2"):
        solve_orders(two_by_two(), ("x",), constants(("1", "1"), ("0", "0")), 2)


def test_the_corner_must_name_the_ratios() -> None:
    with pytest.raises(InputError, match="corner"):
        solve_orders(two_by_two(), ("y",), constants(("1", "1")), 0)
