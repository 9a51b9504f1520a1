"""Blocks without epsilon-form: operators, geometry, the form with periods."""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path

import flint
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from synthetic_systems import RING, connection, matrix

from ibpred.epsform.factorise import factorise
from ibpred.epsform.form import Matrix, Obstructed, PeriodForm
from ibpred.epsform.matrices import inverse as inverse_matrix
from ibpred.epsform.matrices import part, product, solve
from ibpred.epsform.obstructions.geometry import geometry
from ibpred.epsform.obstructions.operators import (
    Operator,
    adjoint,
    is_self_adjoint,
    maximal_points,
    operator,
    right_quotient,
    singular_points,
    symmetric_root,
)
from ibpred.epsform.obstructions.power_series import expansion, inverse, series, theta, times
from ibpred.epsform.obstructions.right_factors import factors, is_irreducible, right_factor
from ibpred.exact.grammar import parse_rational
from ibpred.exact.primes import first_primes
from ibpred.exact.rational import Rational
from ibpred.progress import SILENT
from ibpred.run.chain.chain import Chain
from ibpred.run.storage.files import read_family_file
from ibpred.run.storage.store import Store

PRIMES = first_primes(20)


def made(*texts: str) -> Operator:
    return operator([parse_rational(text, RING) for text in texts], "x")


SUNRISE = made("x+3", "3*x^2+20*x+9", "x*(x+1)*(x+9)")
BANANA = made("x+4", "7*x^2+68*x+64", "6*x*(x^2+15*x+32)", "x^2*(x+4)*(x+16)")


def composed(left: Operator, right: Operator) -> Operator:
    """The product, by the definition: derivatives of the right one, one after the other."""
    zero = RING.zero
    total = [zero] * (left.order + right.order + 1)
    row = [*right.coefficients, *([zero] * left.order)]
    for c in left.coefficients:
        total = [a + c * b for a, b in zip(total, row, strict=True)]
        shifted = [zero, *row[:-1]]
        row = [e.derivative("x") + s for e, s in zip(row, shifted, strict=True)]
    return operator(total, "x")


def test_exponents_of_the_published_operators() -> None:
    """Laporta, Remiddi, hep-ph/0406160; Vanhove, arXiv:1401.6438 (from memory)."""
    assert [p.exponents for p in singular_points(SUNRISE)] == [(0, 0), (0, 0), (0, 0), (1, 1)]
    half = Fraction(1, 2)
    assert [p.exponents for p in singular_points(BANANA)] == [
        (0, 0, 0),
        (0, half, 1),
        (0, half, 1),
        (1, 1, 1),
    ]
    assert [p.text("x") for p in maximal_points(BANANA)] == ["x = 0", "x = infinity"]


def test_quadratic_singular_points() -> None:
    (first, last) = singular_points(made("2", "3*x", "x^2+1"))
    assert (first.text("x"), first.exponents) == ("x^2+1 = 0", (Fraction(-1, 2), 0))
    assert last.exponents == ()  # s^2 - 2 s + 2 = 0 has no rational root


@settings(max_examples=20, deadline=None)
@given(st.integers(-3, 3), st.integers(-3, 3), st.integers(1, 4))
def test_factors_of_order_one_are_found_on_both_sides(a: int, b: int, c: int) -> None:
    first = made(f"-({a}*(x-{c})+{b}*x)", f"x*(x-{c})")  # x^a (x-c)^b
    for whole in (composed(SUNRISE, first), composed(first, SUNRISE)):
        parts = factors(whole)
        assert sorted(p.order for p in parts) == [1, 2]
        assert composed(parts[0], parts[1]) == whole
    assert right_quotient(composed(SUNRISE, first), first) == SUNRISE


def hypergeometric(a: Fraction, b: Fraction, c: Fraction, scale: int) -> Operator:
    """Of F(a, b; c; x/scale)."""
    return made(
        f"-({a})*({b})*{scale}", f"({c})*{scale}^2-({a}+({b})+1)*x*{scale}", f"x*({scale}^2-x*{scale})"
    )


quarters = st.integers(-7, 7).map(lambda n: Fraction(n, 4))


@settings(max_examples=25, deadline=None)
@given(st.tuples(quarters, quarters, quarters), st.tuples(quarters, quarters, quarters), st.integers(1, 3))
def test_products_of_two_fuchsian_operators_fall_apart(
    one: tuple[Fraction, ...], two: tuple[Fraction, ...], scale: int
) -> None:
    left, right = hypergeometric(*one, 1), hypergeometric(*two, scale)
    whole = composed(left, right)
    parts = factors(whole)
    assert all(part.order <= 2 for part in parts)
    total = parts[0]
    for factor in parts[1:]:
        total = composed(total, factor)
    assert total == whole
    assert not is_irreducible(whole)
    assert right_factor(whole, 2).found is not None


def test_factors_of_order_two_and_three() -> None:
    """The operators of the sunrise and of the three-loop banana, one after the other."""
    for pair in ((SUNRISE, BANANA), (BANANA, SUNRISE), (SUNRISE, SUNRISE)):
        assert factors(composed(*pair)) == pair
        assert all(is_irreducible(part) for part in pair)


def test_factors_with_large_coefficients() -> None:
    """Apparent singularities of the adjoint have coefficients beyond machine integers."""
    pair = made("-12", "-(13*x+30)", "3*x*(x-2)"), made("15", "48*(x-6)", "16*x*(x-3)")
    parts = factors(composed(*pair))
    total = parts[0]
    for factor in parts[1:]:
        total = composed(total, factor)
    assert total == composed(*pair)
    assert all(part_.order <= 2 for part_ in parts)


def test_two_right_factors_of_one_class() -> None:
    """The least common left multiple of two operators with equal exponents: both are right factors."""
    first, second = SUNRISE, made("x+5", "3*x^2+24*x+15", "x*(x+3)*(x+5)")
    whole = common_multiple(first, second)
    assert whole.order == 4
    found = right_factor(whole, 2).found
    assert found in (first, second)


def common_multiple(first: Operator, second: Operator) -> Operator:
    """The operator of order four that two of order two divide on the right."""
    # solutions y + z: the column of derivatives of y and of z in terms of (y, y') and (z, z')
    rows = []
    for equation in (first, second):
        c, b, _ = equation.monic()
        columns = [(RING.one, RING.zero)]
        for _ in range(4):
            u, v = columns[-1]
            columns.append((u.derivative("x") - v * c, u + v.derivative("x") - v * b))
        rows += [tuple(column[k] for column in columns) for k in range(2)]
    matrix_ = tuple(row[:4] for row in rows)
    target = tuple((-row[4],) for row in rows)
    return operator([*(v for (v,) in solve(matrix_, target, RING)), RING.one], "x")


def test_adjoint_twice_is_the_identity() -> None:
    assert adjoint(adjoint(BANANA)) == BANANA


def test_symmetric_square() -> None:
    """The three-loop banana operator is a symmetric square (Joyce 1973 for the diamond lattice)."""
    root = symmetric_root(BANANA)
    assert root is not None
    assert root.order == 2
    changed = made("x+5", "7*x^2+68*x+64", "6*x*(x^2+15*x+32)", "x^2*(x+4)*(x+16)")
    assert symmetric_root(changed) is None
    assert is_self_adjoint(BANANA)
    assert is_self_adjoint(SUNRISE)


def test_geometries() -> None:
    assert "elliptic curve" in geometry(SUNRISE, factors(SUNRISE))
    assert "K3 surface" in geometry(BANANA, factors(BANANA))
    four = made(
        "x+5",
        "(3*x+5)*(5*x+57)",
        "25*x^3+518*x^2+1839*x+450",
        "2*x*(5*x^3+140*x^2+777*x+450)",
        "x^2*(x+1)*(x+9)*(x+25)",
    )
    text = geometry(four, factors(four))
    assert text.startswith("irreducible of order four")
    assert "a Calabi-Yau variety of dimension 3" in text


def test_the_sunrise_of_distinct_masses_hides_an_elliptic_curve(tmp_path: Path) -> None:
    """Order four in all, but D^2 splits off: one curve (Adams, Bogner, Weinzierl, arXiv:1302.7004)."""
    definition = read_family_file(Path(__file__).parents[2] / "families" / "sunrise-distinct-masses.toml")
    with Store(tmp_path) as store:
        found = Chain(definition, store, SILENT, 1).epsilon_form()
    assert isinstance(found, Obstructed)
    (told,) = found.obstructions
    assert len(told.rows) == 4
    assert told.factors[1:] == ("D", "D")
    assert told.geometry is not None
    assert told.geometry.startswith(
        "at y = 1/7, z = 1/8: the operator has factors of order 2, 1, 1 (left to right)"
    )
    assert told.geometry.endswith("an elliptic curve")
    assert len(set(told.exponents)) == len(told.exponents)


@settings(max_examples=20, deadline=None)
@given(st.lists(st.integers(-9, 9), min_size=1, max_size=8))
def test_inverse_of_a_power_series(numbers: list[int]) -> None:
    value = series([1, *numbers])
    assert times(value, inverse(value, 20), 20) == flint.fmpq_poly([1])


def two_dimensional_sunrise() -> list[list[str]]:
    """psi and psi' of the operator for generic eps (d = 2 - 2 eps), as a system."""
    lower = ["-(2*eps+1)*(eps*x-eps+x+3)", "-(3*eps*x^2+10*eps*x+3*x^2-9*eps+20*x+9)"]
    return [["0", "1"], [f"{text}/(x*(x+1)*(x+9))" for text in lower]]


def two_dimensional_banana() -> list[list[str]]:
    """The same at three loops for psi, x psi', x^2 psi''."""
    c0 = "(2*eps+1)*(3*eps+1)*(eps*x-2*eps+x+4)"
    c1 = "(11*eps^2*x^2+28*eps^2*x+18*eps*x^2-64*eps^2+120*eps*x+7*x^2+68*x+64)"
    c2 = "6*(eps*x^2+10*eps*x+x^2+15*x+32)/x"
    below = "((x+16)*(x+4))"
    last = [f"-{c0}/{below}", f"-{c1}/(x*{below})", f"2/x-{c2}/{below}"]
    return [["0", "1/x", "0"], ["0", "1/x", "1/x"], last]


def found_form(rows: list[list[str]]) -> PeriodForm:
    outcome = factorise(connection(matrix(rows), (len(rows),)), PRIMES, seed=1)
    assert isinstance(outcome, Obstructed)
    form = outcome.obstructions[0].period_form
    assert form is not None
    return form


def holds(form: PeriodForm, block: Matrix, row: tuple[Rational, ...], eps: Fraction, length: int) -> bool:
    """Whether M = V I with power series V turns the block at numeric eps into eps B.

    The block is that of ``theta I = block I`` in t, which has the name x here; the row is that of the form.
    """
    point = {"eps": eps}
    local = [[expansion(e.substitute(point), "x", length) for e in line] for line in block]
    kernels = [series(k) for k in form.kernels]
    period = inverse(series(form.period), length)
    size, scale = len(block), flint.fmpq(eps.numerator, eps.denominator)
    chain = [[times(expansion(e.substitute(point), "x", length), period, length) for e in row]]
    for k in range(size - 1):
        last, factor = chain[-1], inverse(kernels[k], length)
        new = []
        for j in range(size):
            total = theta(last[j])
            for i in range(size):
                total = total + times(last[i], local[i][j], length)
            new.append(times(total, factor, length) * (1 / scale))
        chain.append(new)
    whole = [[flint.fmpq_poly([0])] * size for _ in range(size)]
    for power, table in form.gauge:
        for i in range(size):
            for k in range(size):
                for j in range(size):
                    whole[i][j] = whole[i][j] + times(series(table[i][k]), chain[k][j], length) * scale**power
    for i in range(size):
        for j in range(size):
            left = theta(whole[i][j])
            right = flint.fmpq_poly([0])
            for k in range(size):
                left = left + times(whole[i][k], local[k][j], length)
                right = right + times(series(form.matrix[i][k]), whole[k][j], length) * scale
            if (left - right).truncate(length - 1) != 0:
                return False
    return True


@pytest.mark.parametrize("rows", [two_dimensional_sunrise(), two_dimensional_banana()], ids=["two", "three"])
@pytest.mark.parametrize("eps", [Fraction(1, 7), Fraction(-3, 5)])
def test_period_forms_by_substitution(eps: Fraction, rows: list[list[str]]) -> None:
    form, x = found_form(rows), RING.variable("x")
    block = tuple(tuple(e * x for e in line) for line in matrix(rows))
    assert holds(form, block, form.row, eps, 24)


@pytest.mark.slow
def test_period_form_of_the_four_loop_banana(tmp_path: Path) -> None:
    """The family's own block, at infinity (Pögel, Wang, Weinzierl, arXiv:2212.08908)."""
    path = Path(__file__).parents[2] / "families" / "banana-four-loop.toml"
    with Store(tmp_path) as store:
        family = Chain(read_family_file(path), store, SILENT, 1)
        outcome, system = family.epsilon_form(), family.connection()
    assert isinstance(outcome, Obstructed)
    (only,) = outcome.obstructions
    form = only.period_form
    assert form is not None
    assert form.point == "x = infinity"
    # t = 1/x takes the name x, and theta = t d/dt is -x d/dx
    eps, t = Fraction(1, 7), RING.variable("x")
    point = {"eps": eps, "x": 1 / t}
    whole = part(system.matrices["x"], only.rows, only.rows)
    block = tuple(tuple(e.substitute(point) * -1 / t for e in line) for line in whole)
    assert form.exponent.denominator == 1
    # psi and its derivatives are a basis without poles
    basis = [tuple(e.substitute(point) / t ** int(form.exponent) for e in form.row)]
    for _ in block:
        last = basis[-1]
        moved = product((last,), block, RING)[0]
        basis.append(tuple(e.derivative("x") * t + m for e, m in zip(last, moved, strict=True)))
    regular = product(tuple(basis[1:]), inverse_matrix(tuple(basis[:-1]), RING), RING)
    first = (RING.one, *(RING.zero,) * (len(block) - 1))
    assert holds(form, regular, first, eps, 12)


def test_kernels_of_the_sunrise_are_the_published_ones() -> None:
    """The kernel below the diagonal is (x-3)^4 psi0^2/(...) (Adams, Weinzierl; from memory)."""
    closed = {(i, j): text for i, j, text in found_form(two_dimensional_sunrise()).closed}
    assert closed[0, 1] == "9/(t^2+10*t+9)*psi0^-2"
    assert closed[0, 0] == closed[1, 1] == "(-3*t^2-10*t+9)/(2*(t^2+10*t+9))"
    assert closed[1, 0] == "(t^4-12*t^3+54*t^2-108*t+81)/(36*(t^2+10*t+9))*psi0^2"
