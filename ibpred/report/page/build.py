"""The page: one HTML file without scripts, fonts or pictures from elsewhere; and its parts."""

from __future__ import annotations

from functools import cache
from typing import TYPE_CHECKING

from ibpred.report.citations import citations
from ibpred.report.dossier import Dossier
from ibpred.report.page import parts, sections

if TYPE_CHECKING:
    from jinja2 import Environment

_FEW = 4  # masters; with so many the groups of formulas are open at first


@cache
def _environment() -> Environment:
    from jinja2 import Environment, PackageLoader, StrictUndefined

    return Environment(
        loader=PackageLoader("ibpred.report.page"),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )


def fragment(name: str, content: object) -> str:
    """A part of the page by itself, as notebooks show it.

    Parameters
    ----------
    name
        Of the part: ``masters``, ``reductions``, ``equations``, ``form``, ``solution`` or ``values``.
    content
        The part; see `ibpred.report.page.parts`.
    """
    return _environment().get_template(f"{name}.html").render(vars(content))


def html_page(dossier: Dossier) -> str:
    """A self-contained page: pictures are inline SVG, formulas MathML, styles in the head.

    Whatever comes from the folder is escaped; expressions are parsed and written anew.
    """
    material = dossier.material
    family = material.family
    setter = sections.typesetter(family)
    shown = (
        parts.masters_part(family, material.masters),
        parts.equations_part(family, material.differential),
        parts.form_part(family, material.epsilon),
        parts.solution_part(family, material.solution),
        parts.values_part(family, material.tables),
    )
    # the parts of the page share one context; `few` means the same in all of them
    context = {name: value for part in shown for name, value in vars(part).items()}
    return (
        _environment()
        .get_template("page.html")
        .render(
            {**context, "few": len(material.masters) <= _FEW},
            family=family,
            dossier=dossier,
            picture=sections.picture(family),
            polynomials=sections.polynomials(dossier.inspection, setter),
            products=sections.products(family, setter),
            notes=material.notes,
            citations=citations(material),
            passed=sum(bool(check["passed"]) for check in dossier.checks),
            zero_sectors=len(dossier.inspection["zero_sectors"]),
            classes=len(dossier.inspection["sector_classes"]),
        )
    )
