from __future__ import annotations

from fractions import Fraction

from ibpred.exact.rational import ring
from ibpred.iterated.symbol import Symbol, is_integrable, letters_of, symbol_of_polylog

FIELD = ring(("x", "y"))
X, Y = FIELD.variable("x"), FIELD.variable("y")
ONE, ZERO = FIELD.one, FIELD.zero


def test_the_dilogarithm() -> None:
    """S(Li2(x)) = -(1 - x) x x, and Li2(x) = -G(0, 1; x)."""
    symbol = symbol_of_polylog((ZERO, ONE), X).scaled(-1)
    assert symbol.terms == {(X - 1, X): Fraction(-1)}
    assert symbol.first_entries() == (X - 1,)


def test_the_five_term_identity() -> None:
    """Abel: Li2(x) + Li2(y) - Li2(xy) - Li2((x-xy)/(1-xy)) - Li2((y-xy)/(1-xy)) has the symbol of logs."""

    def dilogarithm(z: object) -> Symbol:
        return symbol_of_polylog((ZERO, ONE), z).scaled(-1)  # type: ignore[arg-type]

    def logarithm(z: object) -> Symbol:
        return symbol_of_polylog((ZERO,), z)  # type: ignore[arg-type]

    total = dilogarithm(X) + dilogarithm(Y) + dilogarithm(X * Y).scaled(-1)
    for z in ((X - X * Y) / (1 - X * Y), (Y - X * Y) / (1 - X * Y)):
        total = total + dilogarithm(z).scaled(-1)
    left, right = logarithm((1 - X) / (1 - X * Y)), logarithm((1 - Y) / (1 - X * Y))
    assert (total + left.product(right).scaled(-1)).terms == {}


def test_polylogarithms_are_integrable() -> None:
    arguments = (Y, X * Y, ZERO, X + Y)
    symbol = symbol_of_polylog(arguments, FIELD.one)
    assert is_integrable(symbol, ("x", "y"))
    assert {len(e) for e in symbol.terms} == {4}
    broken = dict(symbol.terms)
    del broken[next(iter(broken))]
    assert not is_integrable(Symbol(broken), ("x", "y"))


def test_shuffle_products() -> None:
    one, other = symbol_of_polylog((Y,), X), symbol_of_polylog((ZERO, ONE), X)
    total = Symbol({})
    for word in ((Y, ZERO, ONE), (ZERO, Y, ONE), (ZERO, ONE, Y)):
        total = total + symbol_of_polylog(word, X)
    assert one.product(other).terms == total.terms


def test_trailing_zeros_are_logarithms() -> None:
    both = symbol_of_polylog((Y, ZERO), X) + symbol_of_polylog((ZERO, Y), X)
    assert both.terms == symbol_of_polylog((Y,), X).product(symbol_of_polylog((ZERO,), X)).terms


def test_letters_up_to_constants() -> None:
    assert letters_of((2 * X - 2 * Y) ** 2 / (3 * Y)) == {X - Y: 2, Y: -1}
