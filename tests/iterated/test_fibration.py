"""Fibration bases against values of the polylogarithms, their symbols and known identities."""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction

import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from ibpred.errors import BoundaryError, InputError, PointError
from ibpred.exact.rational import Rational, ring
from ibpred.iterated.constants.constants import Constant
from ibpred.iterated.polylogs.fibration import FibrationBasis, fibration_basis, read_polylog
from ibpred.iterated.polylogs.limits import limit_of_word
from ibpred.iterated.polylogs.polylog_values import Place, polylog
from ibpred.iterated.symbol import Symbol, symbol_of_polylog

FIELD = ring(("x", "y", "z"))
X, Y, Z = (FIELD.variable(name) for name in FIELD.names)
ZERO, ONE = FIELD.zero, FIELD.one
NAMES = FIELD.names
NEAR = {"x": Fraction(1, 997), "y": Fraction(1, 53), "z": Fraction(1, 5)}

ATOMS = [ZERO, ONE, -ONE, X, Y, -X, 1 / X, 1 / Y, 1 - X, 1 - Y, X * Y, 1 / (X * Y), 1 + X, -X / Y, X + Y]
ATOMS += [1 / (1 - X), 1 - X * Y]
ENDS = [ONE, X, Y, 1 - X, X * Y, 1 + Y, Y / (1 + X)]


def number(value: Rational, point: Mapping[str, Fraction]) -> Fraction:
    return value.substitute({n: point[n] for n in value.variables()}).to_fraction()


def agrees(arguments: list[Rational], end: Rational, found: FibrationBasis, side: int) -> bool:
    """Against a direct sum of the polylogarithm near the corner."""
    places = [Place(number(a, NEAR), Fraction(0), side) for a in arguments]
    direct = polylog(places, Place(number(end, NEAR)), 25)
    return bool(found.value(NEAR, 25, side).overlaps(direct))


@settings(max_examples=120, deadline=None)
@given(
    st.lists(st.sampled_from(ATOMS), min_size=1, max_size=3), st.sampled_from(ENDS), st.sampled_from([1, -1])
)
def test_values_near_the_corner(arguments: list[Rational], end: Rational, side: int) -> None:
    try:
        found = fibration_basis(arguments, end, NAMES, side)
    except (InputError, BoundaryError):
        assume(False)
    assert agrees(arguments, end, found, side)


@pytest.mark.parametrize(
    ("arguments", "end", "side"),
    [
        ([1 / (1 - X), 1 / (1 - Y), ZERO, 1 / (1 - Z)], ONE, 0),
        ([1 - X, 1 + Y, -Z, ONE], 1 + Z, 1),
        ([X + Y + Z, X + Y, X, ONE], ONE, -1),
        ([1 / (X * Y), 1 / Y, 1 / X, 1 / (X * Y * Z), ZERO], ONE, 0),
    ],
)
def test_three_variables(arguments: list[Rational], end: Rational, side: int) -> None:
    found = fibration_basis(arguments, end, NAMES, side)
    assert agrees(arguments, end, found, side)
    # letters of each variable are free of it and of the variables before it
    for key, constant in found.terms:
        assert {sum(map(len, key)) + w for w in constant.weights()} == {len(arguments)}
        for j, word in enumerate(key):
            assert all(set(letter.variables()) <= set(NAMES[j + 1 :]) for letter in word)


@settings(max_examples=40, deadline=None)
@given(st.lists(st.sampled_from(ATOMS), min_size=2, max_size=3), st.sampled_from(ENDS))
def test_symbols_agree(arguments: list[Rational], end: Rational) -> None:
    """The symbol forgets constants and sides, and is computed from the total differential alone."""
    try:
        found = fibration_basis(arguments, end, NAMES, 1)
    except (InputError, BoundaryError):
        assume(False)
    total = Symbol({})
    for key, constant in found.terms:
        factor = constant.part(0).real().to_fraction()
        if factor:
            term = Symbol({(): factor})
            for word, name in zip(key, NAMES, strict=True):
                term = term.product(symbol_of_polylog(word, FIELD.variable(name)))
            total = total + term
    assert total.terms == symbol_of_polylog(arguments, end).terms


def test_known_identities() -> None:
    """Reflection and inversion of the dilogarithm (Lewin, Dilogarithms and associated functions, 1958)."""
    assert str(fibration_basis(*read_polylog("G(0, 1; 1-x)", ["x"]), ["x"])) == "-pi^2/6 + G(1,0;x)"
    # 1 + i0 below x is 1/x - i0 above one: -Li2(1/x - i0)
    turned = fibration_basis(*read_polylog("G(0, 1; 1/x)", ["x"]), ["x"], 1)
    assert str(turned) == "-pi^2/3 - I*pi*G(0;x) + G(0,0;x) - G(0,1;x)"
    assert str(fibration_basis(*read_polylog("G(; x)", ["x"]), ["x"])) == "1"


def test_the_five_term_relation() -> None:
    """Li2 at x, y, (1-x)/(1-xy), 1-xy, (1-y)/(1-xy): pi^2/2 and products of logarithms (Rogers, 1907)."""
    field = ring(("x", "y"))
    x, y = field.variable("x"), field.variable("y")
    points = [x, y, (1 - x) / (1 - x * y), 1 - x * y, (1 - y) / (1 - x * y)]
    total: dict[object, Constant] = {}
    for at in points:
        for key, constant in fibration_basis([field.zero, field.one], at, ("x", "y")).terms:
            total[key] = total.get(key, Constant.rational(0)) - constant
    # log x log(1-x) + log y log(1-y) + log((1-x)/(1-xy)) log((1-y)/(1-xy)) are added
    left = {k: v for k, v in total.items() if v}
    pi_squared = left.pop(((), ()))
    assert str(pi_squared) == "pi^2/2"
    value = FibrationBasis(("x", "y"), tuple(left.items())).value(
        {"x": Fraction(1, 50), "y": Fraction(1, 7)}, 20
    )
    logs = [
        fibration_basis([field.zero], at, ("x", "y")).value({"x": Fraction(1, 50), "y": Fraction(1, 7)}, 25)
        for at in (x, 1 - x, y, 1 - y, (1 - x) / (1 - x * y), (1 - y) / (1 - x * y))
    ]
    assert (value + logs[0] * logs[1] + logs[2] * logs[3] + logs[4] * logs[5]).contains(0)


def test_limits() -> None:
    # a letter at infinity suppresses all
    assert limit_of_word([1 / X, ONE], 0, "x") == {}
    # a letter that does not move, and one that runs into zero: G(x; 1) = log(1 - 1/x)
    assert limit_of_word([1 + Y], 0, "x") == {(((1 + Y,), 0),): 1}
    assert limit_of_word([-X], 0, "x") == {
        ((((ZERO,), 0),)): 1,
        ((((ONE,), 0),)): -1,
    }


def test_what_is_refused() -> None:
    with pytest.raises(InputError, match="not linear in x"):
        fibration_basis([1 + X**2], ONE, NAMES)
    with pytest.raises(InputError, match="must name each"):
        fibration_basis([X], Y, ["x"])
    with pytest.raises(InputError, match="infinite"):
        fibration_basis([X, ONE], X, NAMES)
    with pytest.raises(InputError, match="not positive"):
        fibration_basis([X], X - Y, NAMES)
    with pytest.raises(PointError, match="side"):
        fibration_basis([X], ONE, NAMES)
    with pytest.raises(BoundaryError, match="log5"):
        fibration_basis([5 * ONE, X], ONE, NAMES, 1)
    with pytest.raises(InputError, match="not of the form"):
        read_polylog("G(1, 2)", ["x"])
    with pytest.raises(PointError, match="positive value of x"):
        fibration_basis([ONE], X, NAMES).value({"x": Fraction(-1), "y": Fraction(1), "z": Fraction(1)}, 10)
