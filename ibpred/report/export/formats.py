"""The formats that results are exported to."""

from __future__ import annotations

from collections.abc import Callable
from enum import Enum

from ibpred.report.export.c_source import c_source
from ibpred.report.export.json_document import json_document
from ibpred.report.export.latex_document import latex_document
from ibpred.report.export.material import Material
from ibpred.report.export.numpy_module import numpy_module
from ibpred.report.export.pari_script import pari_script
from ibpred.report.export.sympy_module import sympy_module
from ibpred.report.export.wolfram_package import wolfram_package


class Format(Enum):
    """A target of `export`."""

    JSON = "json"
    LATEX = "latex"
    SYMPY = "sympy"
    WOLFRAM = "wolfram"
    PARI = "pari"
    NUMPY = "numpy"
    C = "c"


_WRITERS: dict[Format, tuple[str, Callable[[Material], str]]] = {
    Format.JSON: ("{}.json", json_document),
    Format.LATEX: ("{}.tex", latex_document),
    Format.SYMPY: ("{}_sympy.py", sympy_module),
    Format.WOLFRAM: ("{}.wl", wolfram_package),
    Format.PARI: ("{}.gp", pari_script),
    Format.NUMPY: ("{}_numpy.py", numpy_module),
    Format.C: ("{}.c", c_source),
}


def exported(material: Material, target: Format) -> tuple[str, str]:
    """File name and text of an export.

    Raises
    ------
    InputError
        If there is nothing of the kind (a differential system of a family without invariants).
    ExpressionError
        If a result file holds what is no expression.
    """
    pattern, write = _WRITERS[target]
    return pattern.format(material.identifier), write(material)
