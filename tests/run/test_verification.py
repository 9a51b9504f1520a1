"""`verify` runs the evidence from the files, and finds what is wrong in them."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from ibpred.errors import InputError
from ibpred.progress import SILENT
from ibpred.run.chain.chain import Chain
from ibpred.run.folder.verification import verify_folder
from ibpred.run.folder.whole import run_whole
from ibpred.run.storage.files import read_family_file
from ibpred.run.storage.store import Store

FAMILIES = Path(__file__).parents[2] / "families"


@pytest.fixture(scope="module")
def results(tmp_path_factory: pytest.TempPathFactory) -> dict[str, str]:
    base = tmp_path_factory.mktemp("results")
    source = FAMILIES / "massless-box.toml"
    with Store(base / "work") as store:
        run_whole(Chain(read_family_file(source), store, SILENT, 1), source, base / "out", 20)
    return {path.name: path.read_text(encoding="utf-8") for path in (base / "out").iterdir()}


def folder(tmp_path: Path, files: dict[str, str]) -> Path:
    for name, text in files.items():
        (tmp_path / name).write_text(text, encoding="utf-8")
    return tmp_path


def failed(tmp_path: Path, files: dict[str, str]) -> set[str]:
    return {c.name for c in verify_folder(folder(tmp_path, files), 5_000, SILENT) if not c.passed}


def test_all_holds(tmp_path: Path, results: dict[str, str]) -> None:
    checks = verify_folder(folder(tmp_path, results), 5_000, SILENT)
    assert len(checks) >= 7
    assert all(check.passed for check in checks)


def test_a_changed_differential_equation(tmp_path: Path, results: dict[str, str]) -> None:
    data = json.loads(results["diffeq.json"])
    data["matrices"]["t"][0][2] = "2*(" + data["matrices"]["t"][0][2] + ")"
    names = failed(tmp_path, {**results, "diffeq.json": json.dumps(data)})
    assert {"scaling", "differential equation at fresh points"} <= names


def test_a_changed_value(tmp_path: Path, results: dict[str, str]) -> None:
    data = json.loads(results["values.json"])
    data["tables"][0]["integrals"][2]["epsilon"]["0"]["re"] = "-39.47"
    names = failed(tmp_path, {**results, "values.json": json.dumps(data)})
    assert names == {"direct integration of massless-box(1,1,1,1)", "continuation"}


def test_the_wrong_side_of_a_threshold(tmp_path: Path, results: dict[str, str]) -> None:
    data = json.loads(results["values.json"])
    for value in data["tables"][1]["integrals"]:
        for part in value["epsilon"].values():
            part["im"] = part["im"].removeprefix("-") if part["im"].startswith("-") else f"-{part['im']}"
    names = failed(tmp_path, {**results, "values.json": json.dumps(data)})
    assert names == {"continuation"}


def test_a_folder_of_something_else(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="no folder of results"):
        verify_folder(tmp_path, 5_000, SILENT)
