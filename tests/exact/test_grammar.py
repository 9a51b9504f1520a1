from fractions import Fraction

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ibpred.errors import ExpressionError
from ibpred.exact.grammar import names_in, nearest, parse_number, parse_rational
from ibpred.exact.rational import ring

R = ring(("d", "s", "t"))
d, s, t = (R.variable(name) for name in R.names)


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("-1/3", Fraction(-1, 3)),
        ("0.25", Fraction(1, 4)),
        (".5", Fraction(1, 2)),
        ("2.", Fraction(2)),
        ("2^3", Fraction(8)),
        ("2**-2", Fraction(1, 4)),
        ("-2^2", Fraction(-4)),
        ("(-2)^2", Fraction(4)),
        ("2^(-1)", Fraction(1, 2)),
        ("1 - 2 - 3", Fraction(-4)),
        ("8/2/2", Fraction(2)),
        ("2*-3", Fraction(-6)),
        ("--1", Fraction(1)),
        ("123456789012345678901234567890", Fraction(123456789012345678901234567890)),
    ],
)
def test_numbers(text: str, value: Fraction) -> None:
    assert parse_number(text) == value


@pytest.mark.parametrize(
    ("text", "position", "word"),
    [
        ("", 0, "too early"),
        ("s +", 3, "too early"),
        ("s ! t", 2, "unexpected character"),
        ("s t", 2, "unexpected 't'"),
        ("2s", 1, "unexpected 's'"),
        ("(s", 2, "')' expected"),
        ("s)", 1, "unexpected ')'"),
        ("s^t", 2, "must be an integer"),
        ("s^1.5", 2, "must be an integer"),
        ("s^(2", 3, "')' expected"),
        ("s^10001", 2, "not read"),
        ("s/(t-t)", 1, "division by zero"),
        ("(s-s)^-1", 7, "zero to a negative power"),
        ("s + u", 4, "unknown symbol 'u'"),
        ("s + S", 4, "did you mean 's'"),
        ("(" * 500 + "s" + ")" * 500, 100, "nested"),
        ("-" * 500 + "s", 100, "nested"),
        ("__import__(s)", 0, "unknown symbol"),
        ("s.t", 1, "unexpected character"),
    ],
)
def test_errors_show_the_place(text: str, position: int, word: str) -> None:
    with pytest.raises(ExpressionError) as caught:
        parse_rational(text, R)
    assert word in caught.value.problem
    assert caught.value.position == position
    assert caught.value.text == text


def test_nearest_ignores_case_and_lists_what_is_known() -> None:
    assert nearest("M2", ["s", "m2"]) == "did you mean 'm2'?"
    assert nearest("zzz", ["s", "m2"]) == "known are s, m2"
    assert nearest("zzz", []) == "none is known here"


def test_names() -> None:
    assert names_in("2*k1 + p_2^2 - 3.5*k1") == {"k1", "p_2"}


expressions = st.recursive(
    st.sampled_from(["s", "t", "d", "1", "2", "0.5"]),
    lambda inner: st.one_of(
        st.tuples(inner, st.sampled_from("+-*/"), inner).map(lambda p: f"({p[0]}{p[1]}{p[2]})"),
        inner.map(lambda e: f"-{e}"),
        st.tuples(inner, st.integers(0, 3)).map(lambda p: f"({p[0]})^{p[1]}"),
    ),
    max_leaves=8,
)


@settings(max_examples=100, deadline=None)
@given(expressions)
def test_the_grammar_agrees_with_the_ast_of_python(text: str) -> None:
    """Same precedence as Python's, where ``^`` is ``**``; the values are Rational elements."""
    names = {"s": s, "t": t, "d": d}
    python = text.replace("^", "**").replace("0.5", "half")
    try:
        expected = eval(python, {"__builtins__": {}}, {**names, "half": R.constant(Fraction(1, 2))})
    except ZeroDivisionError:
        with pytest.raises(ExpressionError):
            parse_rational(text, R)
        return
    except (TypeError, OverflowError):
        return
    if isinstance(expected, float):
        return  # numbers only: Python divides them inexactly
    assert parse_rational(text, R) == expected


def polynomial_text(terms: list[tuple[int, int, int, int]]) -> str:
    return "".join(f"{c:+d}*d^{a}*s^{b}*t^{e}" for c, a, b, e in terms)


@given(
    st.lists(
        st.tuples(st.integers(-(10**20), 10**20), *(st.integers(0, 12) for _ in range(3))),
        min_size=4,
        max_size=30,
    ),
    st.lists(st.tuples(st.integers(1, 9), *(st.integers(0, 3) for _ in range(3))), min_size=4, max_size=6),
)
@settings(deadline=None)
def test_long_polynomials_are_read_as_term_by_term(above, below) -> None:
    """Without parentheses around them the same polynomials are read token by token."""
    top, bottom = polynomial_text(above), polynomial_text(below)
    expected = parse_rational(top, R) / parse_rational(bottom, R)
    assert parse_rational(f"({top})/(2*s*({bottom})^2)*2*s*({bottom})", R) == expected


@pytest.mark.parametrize(
    ("text", "position", "word"),
    [
        ("(" + "+".join(["s*t"] * 30) + ")*u", 122, "unknown symbol 'u'"),
        ("(" + "+".join(["s*t"] * 30) + "+u)", 121, "unknown symbol 'u'"),
        ("s*(" + "+".join(["s*t"] * 30) + "+s^10001)", 125, "not read"),
        ("s*(" + "+".join(["s*t"] * 30) + "+*s)", 123, "unexpected"),
    ],
)
def test_messages_about_long_polynomials_show_the_text(text: str, position: int, word: str) -> None:
    with pytest.raises(ExpressionError, match=word) as caught:
        parse_rational(text, R)
    assert caught.value.text == text
    assert caught.value.position == position
