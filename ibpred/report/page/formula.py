"""Expressions of result files as trees: sums, quotients, powers, calls.

The text is read as it stands (nothing is expanded or cancelled), so that a formula looks as in the files.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass

from ibpred.errors import ExpressionError

_TOKEN = re.compile(r"\s*(?:(\d+)|([^\W\d]\w*)|(\*\*|[-+*/^(),;=]))")


@dataclass(frozen=True)
class Number:
    """A natural number, by its digits."""

    digits: str


@dataclass(frozen=True)
class Name:
    """A symbol."""

    text: str


@dataclass(frozen=True)
class Call:
    """A function of arguments; `separators` stand between them."""

    function: str
    arguments: tuple[Formula, ...]
    separators: tuple[str, ...]


@dataclass(frozen=True)
class Power:
    """A base with an integer exponent."""

    base: Formula
    exponent: str


@dataclass(frozen=True)
class Quotient:
    """A product of factors over another one, which is empty for no quotient."""

    above: tuple[Formula, ...]
    below: tuple[Formula, ...]


@dataclass(frozen=True)
class Sum:
    """Terms with their signs, ``+`` or ``-``."""

    terms: tuple[tuple[str, Formula], ...]


Formula = Number | Name | Call | Power | Quotient | Sum


def read_formula(text: str) -> Formula:
    """The tree of an expression.

    Raises
    ------
    ExpressionError
        If the text is none.
    """
    reader = _Reader(text)
    found = reader.sum()
    reader.end()
    return found


class _Reader:
    def __init__(self, text: str) -> None:
        self.text = text
        self.tokens: list[tuple[str, int]] = []
        position = 0
        while position < len(text.rstrip()):
            match = _TOKEN.match(text, position)
            if match is None:
                raise ExpressionError("this is no expression", text, position)
            self.tokens.append((match.group().strip(), match.start()))
            position = match.end()
        self.place = 0

    def peek(self) -> str:
        return self.tokens[self.place][0] if self.place < len(self.tokens) else ""

    def take(self) -> str:
        token = self.peek()
        self.place += 1
        return token

    def fail(self, problem: str) -> ExpressionError:
        at = self.tokens[self.place][1] if self.place < len(self.tokens) else len(self.text)
        return ExpressionError(problem, self.text, at)

    def end(self) -> None:
        if self.peek():
            raise self.fail(f"{self.peek()!r} was not expected here")

    def expect(self, token: str) -> None:
        if self.take() != token:
            self.place -= 1
            raise self.fail(f"{token!r} expected")

    def sum(self) -> Formula:
        sign = self.take() if self.peek() in ("+", "-") else "+"
        terms = [(sign, self.product())]
        while self.peek() in ("+", "-"):
            sign = self.take()
            terms.append((sign, self.product()))
        if len(terms) == 1 and terms[0][0] == "+":
            return terms[0][1]
        return Sum(tuple(terms))

    def product(self) -> Formula:
        above: list[Formula] = [self.power()]
        below: list[Formula] = []
        while self.peek() in ("*", "/"):
            (above if self.take() == "*" else below).append(self.power())
        if len(above) == 1 and not below:
            return above[0]
        return Quotient(tuple(above), tuple(below))

    def power(self) -> Formula:
        base = self.atom()
        if self.peek() not in ("^", "**"):
            return base
        self.take()
        bracket = self.peek() == "("
        if bracket:
            self.take()
        sign = self.take() if self.peek() == "-" else ""
        if not self.peek().isdigit():
            raise self.fail("an integer exponent expected")
        exponent = sign + self.take()
        if bracket:
            self.expect(")")
        return Power(base, exponent)

    def atom(self) -> Formula:
        token = self.take()
        if token.isdigit():
            return Number(token)
        if token == "(":
            inner = self.sum()
            self.expect(")")
            return inner
        if token.isidentifier():
            return self.call(token) if self.peek() == "(" else Name(token)
        self.place -= 1
        raise self.fail("a number, a symbol or '(' expected")

    def call(self, function: str) -> Formula:
        self.expect("(")
        arguments, separators = [self.sum()], []
        while self.peek() in (",", ";"):
            separators.append(self.take())
            arguments.append(self.sum())
        self.expect(")")
        return Call(function, tuple(arguments), tuple(separators))


def total(terms: Sequence[tuple[str, Formula]]) -> Formula:
    """The sum of coefficients (as text) times objects; signs are taken out of the coefficients."""
    found: list[tuple[str, Formula]] = []
    for text, symbol in terms:
        sign, factor = "+", read_formula(text)
        if isinstance(factor, Sum) and len(factor.terms) == 1:
            sign, factor = factor.terms[0]
        if factor == Number("1"):
            found.append((sign, symbol))
        else:
            found.append((sign, Quotient((factor, symbol), ())))
    return Sum(tuple(found)) if found else Number("0")
