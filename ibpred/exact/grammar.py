"""The expression grammar of family files, lists and results.

::

    sum     := ['+'|'-'] product (('+'|'-') product)*
    product := power (('*'|'/') power)*
    power   := atom [('^'|'**') ['-'] INTEGER]
    atom    := NUMBER | NAME | '(' sum ')' | ('+'|'-') power

Numbers are integers or decimals (read exactly: ``0.1`` is 1/10). There is no implicit product.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from difflib import get_close_matches
from fractions import Fraction
from typing import TypeVar

from ibpred.errors import ExpressionError
from ibpred.exact.rational import Rational, Ring

_TOKEN = re.compile(r"\s*(?:(\d+\.\d*|\.\d+|\d+)|([A-Za-z_][A-Za-z_0-9]*)|(\*\*|[-+*/^()]))")
_LONG_SUM = re.compile(r"\(([^()/\s]{40,})\)")
_FACTOR = r"(?:[0-9]+|[A-Za-z_][A-Za-z_0-9]*(?:\^[0-9]+)?)"
_SUM = re.compile(rf"[-+]?{_FACTOR}(?:\*{_FACTOR})*(?:[-+]{_FACTOR}(?:\*{_FACTOR})*)*")
_TERM = re.compile(r"([-+]?)([^-+]+)")
_LONGEST_POWER = 10_000
_DEEPEST = 100  # nested parentheses and signs


V = TypeVar("V")


class MeaninglessError(ArithmeticError):
    """An operation that the algebra's values do not have, such as a vector plus a number.

    Algebras raise it with the reason; the parser turns it into an `ExpressionError` that shows where.
    """


def nearest(word: str, known: Sequence[str]) -> str:
    """The end of a message about an unknown word: the nearest known one, or all that are known."""
    if not known:
        return "none is known here"
    plain = {name.lower(): name for name in reversed(known)}
    near = get_close_matches(word.lower(), list(plain), n=1, cutoff=0.5)
    return f"did you mean {plain[near[0]]!r}?" if near else f"known are {', '.join(known)}"


@dataclass(frozen=True)
class _Token:
    kind: str  # "number", "name", "operator", "end"
    text: str
    position: int


def tokens(text: str) -> tuple[_Token, ...]:
    """Split an expression into tokens.

    Raises
    ------
    ExpressionError
        At the first character that belongs to no token.
    """
    found = []
    position = 0
    end = len(text.rstrip())
    while position < end:
        match = _TOKEN.match(text, position)
        if match is None:
            start = position + len(text[position:]) - len(text[position:].lstrip())
            raise ExpressionError(f"unexpected character {text[start]!r}", text, start)
        kind = ("number", "name", "operator")[match.lastindex - 1]  # type: ignore[operator]
        found.append(_Token(kind, match.group(match.lastindex or 0), match.start(match.lastindex or 0)))
        position = match.end()
    found.append(_Token("end", "", len(text)))
    return tuple(found)


def names_in(text: str) -> frozenset[str]:
    """All names that occur in an expression."""
    return frozenset(token.text for token in tokens(text) if token.kind == "name")


class _Parser:
    def __init__(
        self,
        text: str,
        number: Callable[[Fraction], object],
        name: Callable[[str], object],
    ) -> None:
        self.text = text
        self.tokens = tokens(text)
        self.at = 0
        self.depth = 0
        self.number = number
        self.name = name

    def peek(self) -> _Token:
        return self.tokens[self.at]

    def take(self) -> _Token:
        token = self.tokens[self.at]
        self.at += 1
        return token

    def fail(self, problem: str, token: _Token) -> ExpressionError:
        return ExpressionError(problem, self.text, token.position)

    def whole(self) -> object:
        value = self.sum()
        token = self.peek()
        if token.kind != "end":
            raise self.fail(f"unexpected {token.text!r}", token)
        return value

    def sum(self) -> object:
        value = self.product()
        while self.peek().text in ("+", "-"):
            operator = self.take()
            right = self.product()
            try:
                value = value + right if operator.text == "+" else value - right  # type: ignore[operator]
            except MeaninglessError as error:
                raise self.fail(str(error), operator) from None
        return value

    def product(self) -> object:
        value = self.power()
        while self.peek().text in ("*", "/"):
            operator = self.take()
            right = self.power()
            try:
                value = value * right if operator.text == "*" else value / right  # type: ignore[operator]
            except ZeroDivisionError:
                raise self.fail("division by zero", operator) from None
            except MeaninglessError as error:
                raise self.fail(str(error), operator) from None
        return value

    def power(self) -> object:
        self.depth += 1
        if self.depth > _DEEPEST:
            raise self.fail(f"more than {_DEEPEST} nested parentheses or signs", self.peek())
        value = self.signed_power()
        self.depth -= 1
        return value

    def signed_power(self) -> object:
        token = self.peek()
        if token.text in ("+", "-"):
            self.take()
            value = self.power()
            return -value if token.text == "-" else value  # type: ignore[operator]
        value = self.atom()
        if self.peek().text in ("^", "**"):
            self.take()
            negative = False
            parenthesis = self.peek().text == "("
            if parenthesis:
                self.take()
            if self.peek().text in ("+", "-"):
                negative = self.take().text == "-"
            exponent = self.take()
            if exponent.kind != "number" or not exponent.text.isdigit():
                raise self.fail("a power must be an integer", exponent)
            if parenthesis and self.take().text != ")":
                raise self.fail("')' expected after the power", exponent)
            size = int(exponent.text)
            if size > _LONGEST_POWER:
                raise self.fail(f"a power above {_LONGEST_POWER} is not read", exponent)
            try:
                value = value ** (-size if negative else size)  # type: ignore[operator]
            except ZeroDivisionError:
                raise self.fail("zero to a negative power", exponent) from None
            except MeaninglessError as error:
                raise self.fail(str(error), exponent) from None
        return value

    def atom(self) -> object:
        token = self.take()
        if token.kind == "number":
            return self.number(Fraction(token.text))
        if token.kind == "name":
            try:
                return self.name(token.text)
            except KeyError as error:
                hint = nearest(token.text, [str(k) for k in error.args[1:]])
                raise self.fail(f"unknown symbol {token.text!r}; {hint}", token) from None
        if token.text == "(":
            value = self.sum()
            closing = self.take()
            if closing.text != ")":
                raise self.fail("')' expected", closing)
            return value
        what = "the expression ends too early" if token.kind == "end" else f"unexpected {token.text!r}"
        raise self.fail(what, token)


def parse(text: str, number: Callable[[Fraction], V], name: Callable[[str], V]) -> V:
    """Read an expression into any algebra with ``+ - * / **`` and unary minus.

    Parameters
    ----------
    text
        The expression.
    number, name
        Make a value from an exact number, and from a symbol. `name` raises
        ``KeyError(symbol, *known)`` for an unknown one. The values' operations may raise
        ``ZeroDivisionError`` and `MeaninglessError`.

    Raises
    ------
    ExpressionError
        With the text and the position of what is wrong.
    """
    return _Parser(text, number, name).whole()  # type: ignore[return-value]


def parse_rational(text: str, ring: Ring) -> Rational:
    """Read a rational function of the ring's variables.

    Long expanded polynomials in parentheses, of which large results consist, are read at once.

    Raises
    ------
    ExpressionError
        With the text and the position of what is wrong.
    """
    prefix = max((*ring.names, ""), key=len) + "_"  # such a symbol is none of the ring's
    polynomials: dict[str, Rational] = {}

    def shorten(match: re.Match[str]) -> str:
        value = _expanded(match.group(1), ring)
        if value is None:
            return match.group(0)
        symbol = f"{prefix}{len(polynomials)}"
        polynomials[symbol] = value
        return f"({symbol})"

    def name(symbol: str) -> Rational:
        if symbol in polynomials:
            return polynomials[symbol]
        if symbol not in ring.names:
            raise KeyError(symbol, *ring.names)
        return ring.variable(symbol)

    short = _LONG_SUM.sub(shorten, text)
    try:
        return parse(short, ring.constant, name)
    except ExpressionError:
        if short == text:
            raise
    # once more for a message that shows the user's own text
    polynomials.clear()
    return parse(text, ring.constant, name)


def _expanded(text: str, ring: Ring) -> Rational | None:
    """An expanded polynomial with integer coefficients; None where the text is anything else."""
    if not _SUM.fullmatch(text):
        return None
    places: dict[str, tuple[int, int]] = {}  # of the powers met
    terms: dict[tuple[int, ...], int] = {}
    for sign, term in _TERM.findall(text):
        coefficient, exponents = (-1 if sign == "-" else 1), [0] * len(ring.names)
        for part in term.split("*"):
            if part.isdigit():
                coefficient *= int(part)
                continue
            if part not in places:
                symbol, _, power = part.partition("^")
                if symbol not in ring.names or len(power) > 4:
                    return None
                places[part] = ring.index(symbol), int(power or 1)
            place, size = places[part]
            exponents[place] += size
        key = tuple(exponents)
        terms[key] = terms.get(key, 0) + coefficient
    return ring.fraction(ring.polynomial(terms), ring.context.constant(1))


def parse_number(text: str) -> Fraction:
    """Read an exact rational number such as ``-1/3`` or ``0.25``.

    Raises
    ------
    ExpressionError
        With the text and the position of what is wrong.
    """

    def name(symbol: str) -> Fraction:
        raise KeyError(symbol)

    return parse(text, lambda value: value, name)
