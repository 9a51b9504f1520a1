"""LaTeX of expressions, integrals and matrices, made from their text."""

from __future__ import annotations

import re
from collections.abc import Sequence

_ZETA = re.compile(r"\bzeta(\d+)\b")
_LOG = re.compile(r"\blog(\d+)\b")
_NAME = re.compile(r"\b([A-Za-z]+?)(\d+)\b")
_POWER = re.compile(r"\^(\d+)")
_ROOT = re.compile(r"\bsqrt\(")
_GREEK = {"eps": r"\epsilon", "pi": r"\pi"}
_LARGEST_MATRIX = 20  # columns that amsmath's pmatrix takes once MaxMatrixCols is raised to it


def expression_latex(text: str) -> str:
    """LaTeX of an infix expression; quotients stay in line, ``sqrt(...)`` becomes a root."""
    text = _roots(text)
    text = _ZETA.sub(r"\\zeta_{\1}", text)
    text = _LOG.sub(r"\\log \1", text)
    text = _NAME.sub(r"\1_{\2}", text)
    text = _POWER.sub(r"^{\1}", text)
    for name, symbol in _GREEK.items():
        text = re.sub(rf"\b{name}\b", symbol.replace("\\", "\\\\"), text)
    return text.replace("*", r"\,")


def _roots(text: str) -> str:
    found = ""
    while (match := _ROOT.search(text)) is not None:
        depth, end = 1, match.end()
        while depth and end < len(text):
            depth += (text[end] == "(") - (text[end] == ")")
            end += 1
        found += text[: match.start()] + r"\sqrt{" + _roots(text[match.end() : end - 1]) + "}"
        text = text[end:]
    return found + text


def integral_latex(family: str, powers: Sequence[int]) -> str:
    """An integral by the name of its family and its powers."""
    name = family.replace("_", r"\_")
    return rf"\mathrm{{{name}}}({','.join(map(str, powers))})"


def matrix_latex(entries: Sequence[Sequence[object]], size: int) -> str:
    """A square matrix from its nonzero entries (row, column, text)."""
    if size > _LARGEST_MATRIX:
        return rf"\text{{{size}}}\times\text{{{size}, see the JSON file}}"
    grid = [["0"] * size for _ in range(size)]
    for row, column, text in entries:
        grid[int(str(row))][int(str(column))] = expression_latex(str(text))
    rows = r" \\ ".join(" & ".join(line) for line in grid)
    return rf"\begin{{pmatrix}} {rows} \end{{pmatrix}}"
