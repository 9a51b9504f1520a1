"""The published methods behind a result, so that who uses it can cite them."""

from __future__ import annotations

from dataclasses import dataclass

from ibpred.numerics.value import Route
from ibpred.report.export.material import Material


@dataclass(frozen=True)
class Citation:
    """A method and where it was published.

    Attributes
    ----------
    method
        What it was used for.
    authors
        Of the publication.
    where
        arXiv number, or the journal of an older paper.
    """

    method: str
    authors: str
    where: str


_REDUCTION = (
    Citation("integration by parts", "K.G. Chetyrkin, F.V. Tkachov", "Nucl. Phys. B 192 (1981) 159"),
    Citation("elimination ordered by complexity", "S. Laporta", "hep-ph/0102033"),
    Citation("reduction over prime fields", "A. von Manteuffel, R.M. Schabinger", "arXiv:1406.4513"),
    Citation("functional reconstruction from samples", "T. Peraro", "arXiv:1608.01902"),
    Citation("masters counted by critical points", "R.N. Lee, A.A. Pomeransky", "arXiv:1308.6676"),
)
_MASTERS = (
    Citation("masters whose denominators split", "A.V. Smirnov, V.A. Smirnov", "arXiv:2002.08042"),
    Citation("masters whose denominators split", "J. Usovitsch", "arXiv:2002.08173"),
)
_DIFFERENTIAL = (
    Citation("differential equations in masses", "A.V. Kotikov", "Phys. Lett. B 254 (1991) 158"),
    Citation("differential equations in invariants", "T. Gehrmann, E. Remiddi", "hep-ph/9912329"),
)
_FORM = (
    Citation("ε-factorised form", "J.M. Henn", "arXiv:1304.1806"),
    Citation("reduction to ε-form", "R.N. Lee", "arXiv:1411.0911"),
    Citation("when an ε-form exists", "R.N. Lee, A.A. Pomeransky", "arXiv:1707.07856"),
)
_PERIODS = (
    Citation("ε-form with periods", "L. Adams, S. Weinzierl", "arXiv:1802.05020"),
    Citation("ε-form with periods", "S. Pögel, X. Wang, S. Weinzierl", "arXiv:2212.08908"),
)
_WORDS = (Citation("multiple polylogarithms, numerically", "J. Vollinga, S. Weinzierl", "hep-ph/0410259"),)
_AUXILIARY = (
    Citation("auxiliary mass", "X. Liu, Y.-Q. Ma, C.-Y. Wang", "arXiv:1711.09572"),
    Citation("auxiliary mass", "Liu, Ma", "arXiv:2201.11637"),
)
_REGIONS = (
    Citation("expansion by regions", "M. Beneke, V.A. Smirnov", "hep-ph/9711391"),
    Citation("expansion by regions", "B. Jantzen", "arXiv:1111.2589"),
)
_SERIES = (Citation("tail bounds of series solutions", "M. Mezzarobba, B. Salvy", "arXiv:0904.2452"),)
_DIRECT = (
    Citation("sector decomposition", "T. Binoth, G. Heinrich", "hep-ph/0004013"),
    Citation("sector decomposition, geometric", "T. Kaneko, T. Ueda", "arXiv:0908.2897"),
)


def citations(material: Material) -> tuple[Citation, ...]:
    """The methods that the results rest on, in the order of the chain."""
    found = list(_REDUCTION)
    sectors = [tuple(a > 0 for a in powers) for powers in material.masters]
    if len(set(sectors)) < len(sectors):
        found += _MASTERS
    if material.variables:
        found += _DIFFERENTIAL
    if material.epsilon is not None:
        found += _FORM
        if any(o.get("period_form") for o in material.epsilon["obstructions"]):
            found += _PERIODS
    if material.solution is not None and material.solution["letters"]:
        found += _WORDS
    routes = {value.get("route") for table in material.tables for value in table["integrals"]}
    if material.solution is not None or Route.REGIONS.value in routes:
        found += _REGIONS
    fitted = material.solution is not None and any("fitted" in c for c in material.solution["constants"])
    if fitted or routes & {Route.AUXILIARY_MASS.value, Route.CONTINUATION.value}:
        found += _AUXILIARY
    if material.tables:
        found += _SERIES
    if material.signs is not None and material.tables:
        found += _DIRECT
    return tuple(found)
