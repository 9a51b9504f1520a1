"""Expressions of result files in another language: read by the grammar, written by a dialect.

The text of a result file is parsed, never passed on, so that whatever stands in a file can only come out
as numbers, known symbols and ``+ - * / ^`` of the target language.
"""

from __future__ import annotations

import re
from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction

from ibpred.errors import ExpressionError
from ibpred.exact.grammar import parse

_ROOT = re.compile(r"(?<![A-Za-z_0-9])sqrt\(")
_PLACE = "__sqrt"  # no symbol of a result file begins with two underscores

_SUM, _PRODUCT, _POWER, _ATOM = range(4)


@dataclass(frozen=True)
class Dialect:
    """How a language writes expressions.

    Attributes
    ----------
    number
        Text of a non-negative rational number, an atom or a product of the language.
    symbol
        Text of a symbol; raises ``KeyError(symbol, *known)`` for an unknown one.
    power
        Text of a power, from the text of the base (already in parentheses where it needs them) and the
        exponent.
    root
        Text of a square root, an atom of the language, from the text under it.
    """

    number: Callable[[Fraction], str]
    symbol: Callable[[str], str]
    power: Callable[[str, int], str]
    root: Callable[[str], str]


@dataclass(frozen=True)
class _Text:
    """A piece of text with how tightly it binds, and its value where it is a number."""

    text: str
    binds: int
    dialect: Dialect
    value: Fraction | None = None

    def at(self, least: int) -> str:
        return self.text if self.binds >= least else f"({self.text})"

    def __neg__(self) -> _Text:
        if self.value is not None:
            return _number(self.dialect, -self.value)
        return _Text(f"-{self.at(_PRODUCT)}", _SUM, self.dialect)

    def __add__(self, other: _Text) -> _Text:
        if self.value is not None and other.value is not None:
            return _number(self.dialect, self.value + other.value)
        joined = f"- {other.text[1:]}" if other.text.startswith("-") else f"+ {other.text}"
        return _Text(f"{self.text} {joined}", _SUM, self.dialect)

    def __sub__(self, other: _Text) -> _Text:
        if self.value is not None and other.value is not None:
            return _number(self.dialect, self.value - other.value)
        return _Text(f"{self.text} - {other.at(_PRODUCT)}", _SUM, self.dialect)

    def __mul__(self, other: _Text) -> _Text:
        if self.value is not None and other.value is not None:
            return _number(self.dialect, self.value * other.value)
        return _Text(f"{self.at(_PRODUCT)}*{other.at(_POWER)}", _PRODUCT, self.dialect)

    def __truediv__(self, other: _Text) -> _Text:
        if self.value is not None and other.value is not None:
            return _number(self.dialect, self.value / other.value)
        return _Text(f"{self.at(_PRODUCT)}/{other.at(_POWER)}", _PRODUCT, self.dialect)

    def __pow__(self, exponent: int) -> _Text:
        if self.value is not None:
            return _number(self.dialect, self.value**exponent)
        return _Text(self.dialect.power(self.at(_ATOM), exponent), _POWER, self.dialect)


def _number(dialect: Dialect, value: Fraction) -> _Text:
    text = dialect.number(abs(value))
    if value < 0:
        return _Text(f"-{text}", _SUM, dialect, value)
    return _Text(text, _PRODUCT if value.denominator != 1 else _ATOM, dialect, value)


def translated(text: str, dialect: Dialect) -> str:
    """An expression of a result file in a dialect; it may hold square roots ``sqrt(...)``.

    Raises
    ------
    ExpressionError
        If the text is no expression in symbols that the dialect knows.
    """
    plain, roots = _without_roots(text)
    known = {name: dialect.root(translated(inner, dialect)) for name, inner in roots.items()}

    def symbol(name: str) -> _Text:
        return _Text(known[name] if name in known else dialect.symbol(name), _ATOM, dialect)

    return parse(plain, lambda value: _number(dialect, value), symbol).text


def _without_roots(text: str) -> tuple[str, dict[str, str]]:
    """The text with names for its outermost square roots, and what stands under each."""
    roots: dict[str, str] = {}
    found = ""
    while (match := _ROOT.search(text)) is not None:
        depth, end = 1, match.end()
        while depth and end < len(text):
            depth += (text[end] == "(") - (text[end] == ")")
            end += 1
        if depth:
            raise ExpressionError("')' expected after the square root", text, match.start())
        name = f"{_PLACE}{len(roots)}"
        roots[name] = text[match.end() : end - 1]
        found += text[: match.start()] + name
        text = text[end:]
    return found + text, roots
