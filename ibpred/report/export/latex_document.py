"""The masters with their differential equations and solution as a LaTeX document."""

from __future__ import annotations

from collections.abc import Sequence

from ibpred.report.export.material import Data, Material, ratio_equation
from ibpred.report.latex import expression_latex, integral_latex

_SPECIAL = {
    "\\": r"\textbackslash{}",
    "~": r"\textasciitilde{}",
    "^": r"\textasciicircum{}",
    "<": "$<$",
    ">": "$>$",
    "|": "$|$",
    "ε": r"$\epsilon$",
    "γ": r"$\gamma$",
    "π": r"$\pi$",
    "−": "$-$",
    "×": r"$\times$",
    "²": "${}^2$",
    **{c: f"\\{c}" for c in "&%$#_{}"},
}

_HEAD = r"""\documentclass{article}
\usepackage{amsmath}
\allowdisplaybreaks
\begin{document}
"""


def latex_document(material: Material, closing: Sequence[str] = ()) -> str:
    """A document that compiles by itself; every section can be pasted into a paper.

    Parameters
    ----------
    material
        The results.
    closing
        More sections, in LaTeX, for the end.
    """
    family = material.family
    parts = [_HEAD + rf"\section*{{{plain_latex(family.title)}}}"]
    loops = len(family.loops)
    factor = r"e^{\epsilon\gamma_E}" if loops == 1 else rf"e^{{{loops}\epsilon\gamma_E}}"
    parts.append(
        rf"Conventions: $d={family.dimension}-2\epsilon$, lines $D=m^2-q^2-\mathrm{{i}}0$, measure "
        rf"${factor}\prod_l \mathrm{{d}}^dk_l/(\mathrm{{i}}\pi^{{d/2}})$."
    )
    parts.append(_masters(material))
    for name in material.variables:
        parts.append(_derivatives(name, material.differential["matrices"][name]))
    if material.epsilon is not None and material.epsilon["transformation"]:
        parts.append(_epsilon(material.epsilon))
    if material.solution is not None:
        parts.append(_solution(material.solution))
    for table in material.tables:
        parts.append(_values(family.name, table))
    parts += closing
    return "\n\n".join(parts) + "\n\\end{document}\n"


def plain_latex(text: str) -> str:
    """Prose in LaTeX: what is special there is written out, Greek letters become formulas."""
    return "".join(_SPECIAL.get(c, c) for c in text)


def _masters(material: Material) -> str:
    lines = [
        rf"I_{{{number}}} &= {integral_latex(material.family.name, powers)}"
        for number, powers in enumerate(material.masters, start=1)
    ]
    return "\\subsection*{Master integrals}\n" + _aligned(lines)


def _aligned(lines: Sequence[str]) -> str:
    return "\\begin{align*}\n" + " \\\\\n".join(lines) + "\n\\end{align*}"


def _rows(entries: Sequence[Sequence[object]], symbol: str) -> dict[int, str]:
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


def _derivatives(variable: str, entries: Sequence[Sequence[object]]) -> str:
    name = expression_latex(variable)
    lines = [
        rf"\frac{{\partial I_{{{row + 1}}}}}{{\partial {name}}} &= {total}"
        for row, total in sorted(_rows(entries, "I").items())
    ]
    body = _aligned(lines) if lines else "All derivatives vanish."
    return f"\\subsection*{{Derivatives with respect to ${name}$}}\n{body}"


def _epsilon(data: Data) -> str:
    sides = [ratio_equation(name, text) for name, text in data["ratios"].items()]
    ratios = ", ".join(f"${expression_latex(a)}={expression_latex(b)}$" for a, b in sides)
    parts = [
        "\\subsection*{Canonical form}",
        rf"With {ratios}, $I=T f$ and "
        r"$\mathrm{d}f=\epsilon\sum_l A_l\,\mathrm{d}\log l\,f$:",
    ]
    for letter in data["letters"]:
        lines = [
            rf"A_{{{expression_latex(letter)}}}:\quad f_{{{row + 1}}} &\to {total}"
            for row, total in sorted(_rows(data["matrices"][letter], "f").items())
        ]
        parts.append(_aligned(lines))
    lines = [
        f"I_{{{row + 1}}} &= {total}" for row, total in sorted(_rows(data["transformation"], "f").items())
    ]
    parts.append(_aligned(lines))
    return "\n".join(parts)


def _solution(data: Data) -> str:
    lines = []
    for function in data["functions"]:
        for entry in function["orders"]:
            if entry["text"] != "0":
                lines.append(
                    rf"\bigl[f_{{{function['master'] + 1}}}\bigr]_{{\epsilon^{{{entry['order']}}}}} &= "
                    + expression_latex(entry["text"])
                )
    return (
        "\\subsection*{Solution}\n"
        r"$G(a_1,\dots,a_n;x)=\int_0^x\frac{\mathrm{d}t}{t-a_1}G(a_2,\dots,a_n;t)$, "
        r"$G(0,\dots,0;x)=\log^n(x)/n!$." + "\n" + (_aligned(lines) if lines else "")
    )


def _values(family: str, data: Data) -> str:
    point = ", ".join(f"${expression_latex(n)}={v}$" for n, v in data["point"].items())
    rows = []
    for value in data["integrals"]:
        for order, part in sorted(value["epsilon"].items(), key=lambda item: int(item[0])):
            rows.append(
                rf"${integral_latex(family, value['powers'])}$ & ${order}$ & ${part['re']}$ & ${part['im']}$"
            )
    body = " \\\\\n".join(rows)
    return (
        f"\\subsection*{{Values at {point}}}\n\\begin{{tabular}}{{lrll}}\n"
        f"integral & order & real part & imaginary part \\\\ \\hline\n{body}\n\\end{{tabular}}"
    )
