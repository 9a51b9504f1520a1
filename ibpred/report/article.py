"""A folder of results as a LaTeX document: the exported sections, the evidence, the methods to cite."""

from __future__ import annotations

from ibpred.report.citations import Citation, citations
from ibpred.report.dossier import Dossier
from ibpred.report.export.latex_document import latex_document, plain_latex


def latex_article(dossier: Dossier) -> str:
    """A document that compiles by itself."""
    closing = [_evidence(dossier), _methods(citations(dossier.material))]
    epsilon = dossier.material.epsilon
    if epsilon is not None and epsilon["obstructions"]:
        closing.insert(0, _obstructions(dossier))
    return latex_document(dossier.material, closing)


def _obstructions(dossier: Dossier) -> str:
    assert dossier.material.epsilon is not None
    items = []
    for found in dossier.material.epsilon["obstructions"]:
        rows = ", ".join(f"$I_{{{row + 1}}}$" for row in found["rows"])
        text = rf"\item {rows}: {plain_latex(found['reason'])}."
        if found["operator"]:
            text += rf" Picard--Fuchs operator at $\epsilon=0$: \texttt{{{plain_latex(found['operator'])}}}."
        if found["geometry"]:
            text += f" Geometry: {plain_latex(found['geometry'])}."
        items.append(text)
    return _list("Blocks without canonical form", items)


def _evidence(dossier: Dossier) -> str:
    items = [
        rf"\item {plain_latex(check['name'])}: {'holds' if check['passed'] else 'fails'}; "
        f"{plain_latex(check['detail'])}."
        for check in dossier.checks
    ]
    return _list("Evidence", items)


def _methods(found: tuple[Citation, ...]) -> str:
    items = [
        rf"\item {plain_latex(c.method)}: {plain_latex(c.authors)}, {plain_latex(c.where)}." for c in found
    ]
    return _list("Methods to cite", items)


def _list(title: str, items: list[str]) -> str:
    body = "\n".join(items)
    return f"\\subsection*{{{title}}}\n\\begin{{itemize}}\n{body}\n\\end{{itemize}}"
