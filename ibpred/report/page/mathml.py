"""Formulas as MathML, which browsers draw without any script."""

from __future__ import annotations

import re
from collections.abc import Collection, Sequence
from html import escape

from ibpred.errors import ExpressionError
from ibpred.report.page.formula import Call, Formula, Name, Number, Power, Quotient, Sum, read_formula

_GREEK = {"eps": "ε", "pi": "π", "psi": "ψ", "theta": "θ"}
_INDEXED = re.compile(r"([^\W\d_]+?)_?(\d+)")
_CONSTANTS = {"zeta": "ζ", "log": "log"}
_LONGEST = 1500  # characters of an expression that is still drawn


class Typesetter:
    """Writes formulas; names that the user chose are never taken apart.

    Parameters
    ----------
    whole
        Names, such as ``m2``, whose digits are no index.
    """

    def __init__(self, whole: Collection[str]) -> None:
        self._whole = frozenset(whole)

    def inline(self, text: str) -> str:
        """An expression in a line of text; one that is too long, or none, as it stands."""
        body = self.expression(text)
        return f"<math>{body}</math>" if body is not None else f"<code>{escape(text)}</code>"

    def expression(self, text: str) -> str | None:
        """MathML of an expression; None for one that is too long or none."""
        if len(text) > _LONGEST:
            return None
        try:
            return self.formula(read_formula(text))
        except ExpressionError:
            return None

    def display(self, left: str, right: Formula) -> str:
        """An equation on its own line; `left` is MathML."""
        return displayed(f"{left}<mo>=</mo>{self.formula(right)}")

    def matrix(self, entries: Sequence[Sequence[object]], size: int) -> str:
        """A square matrix from its nonzero entries (row, column, text)."""
        cells = [["<mn>0</mn>"] * size for _ in range(size)]
        for row, column, text in entries:
            drawn = self.expression(str(text))
            cells[int(str(row))][int(str(column))] = drawn if drawn is not None else "<mo>⋯</mo>"
        rows = "".join("<mtr>" + "".join(f"<mtd>{cell}</mtd>" for cell in line) + "</mtr>" for line in cells)
        return f"<mrow><mo>(</mo><mtable>{rows}</mtable><mo>)</mo></mrow>"

    def formula(self, formula: Formula) -> str:
        """MathML of a formula."""
        if isinstance(formula, Number):
            return f"<mn>{formula.digits}</mn>"
        if isinstance(formula, Name):
            return self.name(formula.text)
        if isinstance(formula, Power):
            base = self._factor(formula.base)
            exponent = f"<mn>{formula.exponent.removeprefix('-')}</mn>"
            if formula.exponent.startswith("-"):
                exponent = f"<mrow><mo>−</mo>{exponent}</mrow>"
            return f"<msup>{base}{exponent}</msup>"
        if isinstance(formula, Call):
            return self._call(formula)
        if isinstance(formula, Sum):
            return self._sum(formula)
        return self._quotient(formula)

    def name(self, text: str) -> str:
        """A symbol; trailing digits are an index unless the name is a user's."""
        if text in self._whole:
            return f"<mi>{escape(text)}</mi>"
        if text in _GREEK:
            return f"<mi>{_GREEK[text]}</mi>"
        match = _INDEXED.fullmatch(text)
        if match is None:
            return f"<mi>{escape(text)}</mi>"
        letter, index = match.groups()
        if letter == "log":
            return f"<mrow><mi>log</mi><mspace width='0.15em'/><mn>{index}</mn></mrow>"
        letter = _CONSTANTS.get(letter, _GREEK.get(letter, letter))
        if letter == "ζ" and len(index) > 1:
            index = ",".join(index)
        return f"<msub><mi>{escape(letter)}</mi><mn>{index}</mn></msub>"

    def _call(self, call: Call) -> str:
        inner = [self.formula(argument) for argument in call.arguments]
        if call.function == "sqrt" and len(inner) == 1:
            return f"<msqrt>{inner[0]}</msqrt>"
        parts = [inner[0]]
        for separator, argument in zip(call.separators, inner[1:], strict=True):
            parts += [f'<mo separator="true">{separator}</mo>', argument]
        return f"<mrow>{self.name(call.function)}{_enclosed(''.join(parts))}</mrow>"

    def _sum(self, formula: Sum) -> str:
        parts = []
        for number, (sign, term) in enumerate(formula.terms):
            if number or sign == "-":
                parts.append("<mo>−</mo>" if sign == "-" else "<mo>+</mo>")
            parts.append(self._factor(term) if isinstance(term, Sum) else self.formula(term))
        return f"<mrow>{''.join(parts)}</mrow>"

    def _quotient(self, formula: Quotient) -> str:
        if not formula.below:
            return f"<mrow>{self._product(formula.above)}</mrow>"
        above = formula.above
        # a single sum needs no parentheses above or below the bar
        top = self.formula(above[0]) if len(above) == 1 else self._product(above)
        below = formula.below
        bottom = self.formula(below[0]) if len(below) == 1 else self._product(below)
        return f"<mfrac><mrow>{top}</mrow><mrow>{bottom}</mrow></mfrac>"

    def _product(self, factors: Sequence[Formula]) -> str:
        return "<mspace width='0.12em'/>".join(self._factor(f) for f in factors)

    def _factor(self, formula: Formula) -> str:
        if isinstance(formula, Sum):
            return f"<mrow>{_enclosed(self.formula(formula))}</mrow>"
        return self.formula(formula)


def displayed(body: str) -> str:
    """A formula on a line of its own, flush left."""
    return f'<div class="formula"><math displaystyle="true">{body}</math></div>'


def _enclosed(body: str) -> str:
    """Parentheses around a formula; they grow with quotients only."""
    grow = "true" if "<mfrac>" in body or "<mtable>" in body else "false"
    return f'<mo stretchy="{grow}">(</mo>{body}<mo stretchy="{grow}">)</mo>'


def indexed(letter: str, index: int) -> str:
    """A letter with an index."""
    return f"<msub><mi>{letter}</mi><mn>{index}</mn></msub>"


def integral(name: str, powers: Sequence[int]) -> str:
    """An integral by its family and powers."""
    inner = "<mo separator='true'>,</mo>".join(
        f"<mn>{a}</mn>" if a >= 0 else f"<mrow><mo>−</mo><mn>{-a}</mn></mrow>" for a in powers
    )
    return f"<mrow><mtext>{escape(name)}</mtext>{_enclosed(inner)}</mrow>"


def derivative(letter: str, index: int, variable: str) -> str:
    """A partial derivative of an indexed letter; `variable` is MathML."""
    top = f"<mrow><mi>∂</mi>{indexed(letter, index)}</mrow>"
    return f"<mfrac>{top}<mrow><mi>∂</mi>{variable}</mrow></mfrac>"
