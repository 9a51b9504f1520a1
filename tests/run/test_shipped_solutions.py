"""The shipped results: made from the shipped families, and their evidence holds again."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from ibpred.progress import SILENT
from ibpred.run.folder.verification import verify_folder

ROOT = Path(__file__).parents[2]
FOLDERS = sorted(path for path in (ROOT / "solutions").iterdir() if path.is_dir())
QUICK = 2_000  # sample points of the direct integration
LONG = {
    "banana-three-loop",
    "box-four-legs",
    "box-three-legs",
    "pentagon",
    "pentagon-massive-loop",
    "pentagon-one-leg",
}


def test_there_are_some() -> None:
    assert {"massless-box", "planar-double-box"} <= {folder.name for folder in FOLDERS}


@pytest.mark.parametrize("folder", FOLDERS, ids=lambda path: path.name)
def test_made_from_the_shipped_family(folder: Path) -> None:
    family = f"{folder.name}.toml"
    assert (folder / family).read_bytes() == (ROOT / "families" / family).read_bytes()
    evidence = json.loads((folder / "evidence.json").read_text(encoding="utf-8"))
    assert evidence["checks"]
    assert all(check["passed"] for check in evidence["checks"])


@pytest.mark.parametrize(
    "folder",
    [pytest.param(f, marks=pytest.mark.slow) if f.name in LONG else f for f in FOLDERS],
    ids=lambda path: path.name,
)
def test_evidence_holds_again(folder: Path) -> None:
    failed = [check for check in verify_folder(folder, QUICK, SILENT) if not check.passed]
    assert not failed
