"""All results of a family in one JSON document."""

from __future__ import annotations

import json

import ibpred
from ibpred.report.export.material import Material, conventions


def json_document(material: Material) -> str:
    """The conventions, and every result under the name of the command that prints it."""
    document = {
        "family": material.family.name,
        "title": material.family.title,
        "version": ibpred.__version__,
        "dimension": material.family.dimension,
        "conventions": list(conventions(material)),
        "invariants": {i.name: i.dimension for i in material.family.invariants},
        "diffeq": material.differential,
        "epsform": material.epsilon,
        "solve": material.solution,
        "evaluate": list(material.tables),
    }
    return json.dumps(document, ensure_ascii=False, indent=1) + "\n"
