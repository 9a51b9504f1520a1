"""A folder of results, read for a report."""

from __future__ import annotations

from pathlib import Path

from ibpred.errors import InputError
from ibpred.report.dossier import Dossier
from ibpred.report.summary import read_stages
from ibpred.run.folder.exports import document, folder_material


def read_dossier(folder: Path) -> Dossier:
    """All that is in a folder that `run` wrote.

    Raises
    ------
    InputError
        If it is no such folder, or a file in it cannot be read.
    """
    material = folder_material(folder)
    inspection = document(folder / "inspect.json")
    evidence = document(folder / "evidence.json")
    if inspection is None or evidence is None:
        missing = "inspect.json" if inspection is None else "evidence.json"
        raise InputError(f"{folder} holds no {missing}; run `ibpred run` again")
    try:
        source = (folder / f"{material.family.name}.toml").read_text(encoding="utf-8")
        told = (folder / "summary.md").read_text(encoding="utf-8")
    except (OSError, UnicodeDecodeError) as error:
        raise InputError(f"{folder}: {error}") from error
    checks = tuple(evidence["checks"])
    return Dossier(material, source, str(evidence["version"]), inspection, checks, read_stages(told))
