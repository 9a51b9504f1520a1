"""All that a folder of results holds, for those who write about it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from ibpred.report.export.material import Material
from ibpred.report.summary import Stage

Data = Mapping[str, Any]


@dataclass(frozen=True)
class Dossier:
    """A folder of results.

    Attributes
    ----------
    material
        The family, the differential equations, the epsilon-form, the solution, values.
    source
        The family file.
    version
        Of the package that made the results.
    inspection
        U, F, sectors (as `inspect` prints them).
    checks
        The evidence: ``{"name", "passed", "detail"}`` each.
    stages
        What the run did, and how long it took.
    """

    material: Material
    source: str
    version: str
    inspection: Data
    checks: tuple[Data, ...]
    stages: tuple[Stage, ...]
