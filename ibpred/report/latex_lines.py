"""Results as lines of LaTeX formulas, each with its place of alignment."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from ibpred.report.json_common import Labelled
from ibpred.report.latex import expression_latex, integral_latex

Data = Mapping[str, Any]


def aligned(lines: Sequence[str]) -> str:
    """Lines as a display that may break over pages."""
    return "\\begin{align*}\n" + " \\\\\n".join(lines) + "\n\\end{align*}"


def display(lines: Sequence[str]) -> str:
    """Lines as one display, as notebooks draw it; empty for no line."""
    if not lines:
        return ""
    return "$$\\begin{aligned}\n" + " \\\\\n".join(lines) + "\n\\end{aligned}$$"


def master_lines(family: str, masters: Sequence[Sequence[int]]) -> list[str]:
    """The masters by name."""
    return [
        rf"I_{{{number}}} &= {integral_latex(family, powers)}"
        for number, powers in enumerate(masters, start=1)
    ]


def reduction_lines(data: Labelled) -> list[str]:
    """Integrals or sums in terms of the masters, then the masters by name."""
    lines = []
    for name, terms in data.rows:
        total = sum_rows([(0, index, text) for index, text in terms], "I").get(0, "0")
        lines.append(f"{_named(name)} &= {total}")
    return [*lines, *(f"I_{{{n}}} &= {_named(name)}" for n, name in enumerate(data.masters, start=1))]


def _named(name: str) -> str:
    escaped = name.replace("_", r"\_")
    return rf"\mathrm{{{escaped}}}"


def derivative_lines(variable: str, entries: Sequence[Sequence[object]]) -> list[str]:
    """The derivatives of the masters in one invariant."""
    name = expression_latex(variable)
    return [
        rf"\frac{{\partial I_{{{row + 1}}}}}{{\partial {name}}} &= {total}"
        for row, total in sorted(sum_rows(entries, "I").items())
    ]


def letter_lines(data: Data, letter: str) -> list[str]:
    """The matrix of a letter, row by row."""
    return [
        rf"A_{{{expression_latex(letter)}}}:\quad f_{{{row + 1}}} &\to {total}"
        for row, total in sorted(sum_rows(data["matrices"][letter], "f").items())
    ]


def transformation_lines(data: Data) -> list[str]:
    """The masters in canonical functions."""
    return [
        f"I_{{{row + 1}}} &= {total}" for row, total in sorted(sum_rows(data["transformation"], "f").items())
    ]


def function_lines(data: Data) -> list[str]:
    """The canonical functions order by order, zeros left out."""
    return [
        rf"\bigl[f_{{{function['master'] + 1}}}\bigr]_{{\epsilon^{{{entry['order']}}}}} &= "
        + expression_latex(entry["text"])
        for function in data["functions"]
        for entry in function["orders"]
        if entry["text"] != "0"
    ]


def value_lines(data: Data) -> list[str]:
    """The integrals of a table of values as Laurent series; radii are left out."""
    lines = []
    for value in data["integrals"]:
        terms = []
        for order, part in sorted(value["epsilon"].items(), key=lambda item: int(item[0])):
            terms.append(rf"{_number(part)}\,\epsilon^{{{order}}}")
        lines.append(f"{integral_latex(data['family'], value['powers'])} &= {'+'.join(terms) or '0'}")
    return lines


def expansion_lines(data: Data) -> list[str]:
    """Expansions in a distance h, as `evaluate --approach` prints them; a line for each power of eps."""
    lines = []
    for value in data["integrals"]:
        left = integral_latex(data["family"], value["powers"])
        for order, terms in sorted(value["epsilon"].items(), key=lambda item: int(item[0])):
            parts = [
                _number(term)
                + (rf"\,h^{{{term['power']}}}" if term["power"] else "")
                + (rf"\,\log^{{{term['log']}}} h" if term["log"] else "")
                for term in terms
            ]
            parts.append(rf"O(h^{{{data['terms'] + 1}}})")
            lines.append(rf"\bigl[{left}\bigr]_{{\epsilon^{{{order}}}}} &= {'+'.join(parts)}")
    return lines


def _number(part: Data) -> str:
    """A complex number, in parentheses unless it is real and positive."""
    real, imaginary = str(part["re"]), str(part["im"])
    if imaginary != "0":
        sign = "" if imaginary.startswith("-") else "+"
        return rf"({real}{sign}{imaginary}\,\mathrm{{i}})"
    return f"({real})" if real.startswith("-") else real


def sum_rows(entries: Sequence[Sequence[object]], symbol: str) -> dict[int, str]:
    """For each row of a sparse matrix the sum of its entries times symbols."""
    found: dict[int, str] = {}
    for row, column, text in entries:
        written = str(text)
        sign = "-" if written.startswith("-") and not _has_sum(written[1:]) else "+"
        factor = written[1:] if sign == "-" else written
        if _has_sum(factor):
            factor = f"({factor})"
        product = rf"{expression_latex(factor)}\,{symbol}_{{{int(str(column)) + 1}}}"
        key = int(str(row))
        before = found.get(key, "")
        found[key] = f"{before} {sign} {product}" if before or sign == "-" else product
    return found


def _has_sum(text: str) -> bool:
    depth = 0
    for i, character in enumerate(text):
        depth += (character == "(") - (character == ")")
        if i and depth == 0 and character in "+-":
            return True
    return False
