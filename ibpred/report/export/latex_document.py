"""The masters with their differential equations and solution as a LaTeX document."""

from __future__ import annotations

from collections.abc import Sequence

from ibpred.report.export.material import Data, Material, ratio_equation
from ibpred.report.latex import expression_latex, integral_latex
from ibpred.report.latex_lines import (
    aligned,
    derivative_lines,
    function_lines,
    letter_lines,
    master_lines,
    transformation_lines,
)

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
    masters = aligned(master_lines(family.name, material.masters))
    parts.append(f"\\subsection*{{Master integrals}}\n{masters}")
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


def _derivatives(variable: str, entries: Sequence[Sequence[object]]) -> str:
    lines = derivative_lines(variable, entries)
    body = aligned(lines) if lines else "All derivatives vanish."
    return f"\\subsection*{{Derivatives with respect to ${expression_latex(variable)}$}}\n{body}"


def _epsilon(data: Data) -> str:
    sides = [ratio_equation(name, text) for name, text in data["ratios"].items()]
    ratios = ", ".join(f"${expression_latex(a)}={expression_latex(b)}$" for a, b in sides)
    parts = [
        "\\subsection*{Canonical form}",
        rf"With {ratios}, $I=T f$ and "
        r"$\mathrm{d}f=\epsilon\sum_l A_l\,\mathrm{d}\log l\,f$:",
    ]
    parts += [aligned(letter_lines(data, letter)) for letter in data["letters"]]
    parts.append(aligned(transformation_lines(data)))
    return "\n".join(parts)


def _solution(data: Data) -> str:
    lines = function_lines(data)
    return (
        "\\subsection*{Solution}\n"
        r"$G(a_1,\dots,a_n;x)=\int_0^x\frac{\mathrm{d}t}{t-a_1}G(a_2,\dots,a_n;t)$, "
        r"$G(0,\dots,0;x)=\log^n(x)/n!$." + _region(data) + "\n" + (aligned(lines) if lines else "")
    )


def _region(data: Data) -> str:
    if "region" not in data:
        return ""
    return f" These functions hold for {', '.join(f'${text}$' for text in data['region'])}."


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
