"""The page: one HTML file without scripts, fonts or pictures from elsewhere."""

from __future__ import annotations

from ibpred.report.citations import citations
from ibpred.report.dossier import Dossier
from ibpred.report.page import sections


def html_page(dossier: Dossier) -> str:
    """A self-contained page: pictures are inline SVG, formulas MathML, styles in the head.

    Whatever comes from the folder is escaped; expressions are parsed and written anew.
    """
    from jinja2 import Environment, PackageLoader, StrictUndefined

    environment = Environment(
        loader=PackageLoader("ibpred.report.page"),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    material = dossier.material
    family = material.family
    setter = sections.typesetter(family)
    epsilon, solution = material.epsilon, material.solution
    return environment.get_template("page.html").render(
        family=family,
        dossier=dossier,
        picture=sections.picture(family),
        polynomials=sections.polynomials(dossier.inspection, setter),
        products=sections.products(family, setter),
        masters=sections.master_rows(material),
        derivatives=sections.derivatives(material, setter),
        ratios=() if epsilon is None else sections.ratios(epsilon, setter),
        letters=() if epsilon is None else sections.letters(epsilon, setter),
        canonical=() if epsilon is None else sections.canonical(epsilon, setter),
        obstacles=() if epsilon is None else sections.obstacles(epsilon),
        functions=() if solution is None else sections.functions(solution, setter),
        constants=() if solution is None else sections.constants(solution, setter),
        letters_in_solution=solution is not None and bool(solution["letters"]),
        values=sections.value_tables(material),
        notes=material.notes,
        citations=citations(material),
        passed=sum(bool(check["passed"]) for check in dossier.checks),
        zero_sectors=len(dossier.inspection["zero_sectors"]),
        classes=len(dossier.inspection["sector_classes"]),
    )
