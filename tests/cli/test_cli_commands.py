"""The commands print the JSON objects that the design fixes, and what is in them is right."""

from __future__ import annotations

import json
from fractions import Fraction
from pathlib import Path
from typing import Any

import pytest
import sympy

from ibpred.cli.common import guarded
from ibpred.cli.main import group

FAMILIES = Path(__file__).parents[2] / "families"


@pytest.fixture(scope="module")
def work(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return tmp_path_factory.mktemp("work")


def printed(capsys: pytest.CaptureFixture[str], work: Path, *arguments: str) -> Any:
    words = [*arguments, "--work", str(work), "--quiet", "--json"]
    code = guarded(lambda: group.main(args=words, standalone_mode=False))
    out, err = capsys.readouterr()
    assert code == 0, err
    assert out.count("\n") == 1
    return json.loads(out)


BOX = str(FAMILIES / "massless-box.toml")


def test_inspect(capsys: pytest.CaptureFixture[str], work: Path) -> None:
    data = printed(capsys, work, "inspect", BOX)
    assert set(data) >= {"family", "loops", "legs", "U", "F", "sectors", "zero_sectors", "sector_classes"}
    assert (data["family"], data["loops"], data["legs"], data["sectors"]) == ("massless-box", 1, 4, 16)
    x1, x2, x3, x4, s, t = sympy.symbols("x1 x2 x3 x4 s t")
    assert sympy.expand(sympy.sympify(data["U"]) - (x1 + x2 + x3 + x4)) == 0
    assert sympy.expand(sympy.sympify(data["F"]) + s * x1 * x3 + t * x2 * x4) == 0
    assert len(data["zero_sectors"]) + sum(map(len, data["sector_classes"])) == 16


def test_masters(capsys: pytest.CaptureFixture[str], work: Path) -> None:
    data = printed(capsys, work, "masters", BOX)
    assert data["count"] == len(data["masters"]) == 3
    assert {"powers": [1, 1, 1, 1], "lines": 4} in data["masters"]


def test_reduce(capsys: pytest.CaptureFixture[str], work: Path) -> None:
    data = printed(capsys, work, "reduce", BOX, "--integral", "1,2,1,1", "--integral", "0,1,0,0")
    assert data["masters"] == [[1, 0, 1, 0], [0, 1, 0, 1], [1, 1, 1, 1]]
    assert [r["powers"] for r in data["reductions"]] == [[1, 2, 1, 1], [0, 1, 0, 0]]
    assert data["reductions"][1]["terms"] == []
    assert all(set(term) == {"master", "coefficient"} for term in data["reductions"][0]["terms"])


def test_reduce_all_within(capsys: pytest.CaptureFixture[str], work: Path) -> None:
    data = printed(capsys, work, "reduce", BOX, "--max-dots", "1", "--max-rank", "1")
    powers = {tuple(r["powers"]) for r in data["reductions"]}
    assert (2, 1, 1, 1) in powers
    assert (1, 1, 1, -1) in powers
    assert (2, 1, 1, -1) in powers
    assert (2, 2, 1, 1) not in powers


def test_diffeq_scales(capsys: pytest.CaptureFixture[str], work: Path) -> None:
    data = printed(capsys, work, "diffeq", BOX)
    assert data["variables"] == ["s", "t"]
    names = sympy.symbols("d s t")
    total = sympy.zeros(3)
    for variable in "st":
        for row, column, value in data["matrices"][variable]:
            total[row, column] += 2 * sympy.Symbol(variable) * sympy.sympify(value.replace("^", "**"))
    d = names[0]
    assert sympy.simplify(total - sympy.diag(d - 4, d - 4, d - 8)) == sympy.zeros(3)


def test_epsform_and_solve(capsys: pytest.CaptureFixture[str], work: Path) -> None:
    data = printed(capsys, work, "epsform", BOX)
    assert data["variables"] == ["x"]
    assert data["ratios"] == {"x": "t/s"}
    assert sorted(data["letters"]) == ["1+x", "x"]
    assert set(data["matrices"]) == set(data["letters"])
    assert data["obstructions"] == []
    solved = printed(capsys, work, "solve", BOX, "--weight", "3")
    assert [f["master"] for f in solved["functions"]] == [0, 1, 2]
    assert [o["order"] for o in solved["functions"][2]["orders"]] == [0, 1, 2, 3]
    leading = {c["master"]: c["value"] for c in solved["constants"] if c["order"] == 0}
    assert set(leading) == {0, 1, 2}


def test_evaluate(capsys: pytest.CaptureFixture[str], work: Path) -> None:
    data = printed(capsys, work, "evaluate", BOX, "--at", "s=-1,t=-1/3", "--digits", "40")
    assert data["point"] == {"s": "-1", "t": "-1/3"}
    assert data["digits"] == 40
    box = data["integrals"][2]
    assert box["powers"] == [1, 1, 1, 1]
    assert box["certified"] is True
    assert set(box["epsilon"]) == {"-2", "-1", "0"}
    # 4/(s t) (Bern, Dixon, Kosower, hep-ph/9306240), exact at this point
    assert Fraction(box["epsilon"]["-2"]["re"]) == 12
    assert float(box["epsilon"]["0"]["radius"]) < 1e-38


def test_run_writes_one_folder(capsys: pytest.CaptureFixture[str], work: Path, tmp_path: Path) -> None:
    folder = tmp_path / "results"
    data = printed(capsys, work, "run", BOX, "--output", str(folder))
    assert data["complete"] is True
    names = {path.name for path in folder.iterdir()}
    assert names >= {
        "massless-box.toml",
        "inspect.json",
        "masters.json",
        "diffeq.json",
        "epsform.json",
        "solution.json",
        "values.json",
        "evidence.json",
        "summary.md",
    }
    evidence = json.loads((folder / "evidence.json").read_text())
    assert evidence["checks"]
    assert all(check["passed"] for check in evidence["checks"])
    before = {path.name: path.read_bytes() for path in folder.iterdir() if path.suffix == ".json"}
    printed(capsys, tmp_path / "another", "run", BOX, "--output", str(folder))
    after = {path.name: path.read_bytes() for path in folder.iterdir() if path.suffix == ".json"}
    assert before == after  # same input, same seed, same bytes
