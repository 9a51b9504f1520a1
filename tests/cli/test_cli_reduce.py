"""The command reduce: sums, tables on disk, checks, the finished store."""

from __future__ import annotations

import csv
import json
import sqlite3
from pathlib import Path

import pytest

from ibpred.cli.common import guarded
from ibpred.cli.main import group

FAMILY = Path(__file__).parents[2] / "families" / "massless-box.toml"


@pytest.fixture
def call(tmp_path: Path, capsys: pytest.CaptureFixture[str]):
    """Run ``ibpred reduce`` on the massless box; exit code, standard output, standard error."""
    file = tmp_path / FAMILY.name
    file.write_text(FAMILY.read_text(encoding="utf-8"), encoding="utf-8")

    def run(*options: str) -> tuple[int, str, str]:
        arguments = ["reduce", str(file), "--work", str(tmp_path / "work"), *options]
        code = guarded(lambda: group.main(arguments, standalone_mode=False))
        printed = capsys.readouterr()
        return code, printed.out, printed.err

    return run


def test_a_finished_store_answers_without_identities(call, monkeypatch: pytest.MonkeyPatch) -> None:
    wanted = ("--max-dots", "1", "--max-rank", "1", "--json", "--quiet")
    code, out, _ = call(*wanted)
    assert code == 0
    table = {tuple(r["powers"]): r["terms"] for r in json.loads(out)["reductions"]}
    assert len(table) > 30

    def refuse(*_: object) -> None:
        raise AssertionError("nothing is to be computed")

    for name in ("analyse_together", "reduce_together", "family_identities"):
        monkeypatch.setattr(f"ibpred.run.chain.joint.{name}", refuse)
    monkeypatch.setattr("ibpred.run.chain.equations.analyse", refuse)
    for powers in [(2, 1, 1, 1), (1, 2, 1, -1)]:
        code, out, _ = call("--integral", ",".join(map(str, powers)), "--json", "--quiet")
        assert code == 0
        assert json.loads(out)["reductions"] == [{"powers": list(powers), "terms": table[powers]}]


def test_only_what_is_missing_is_reduced(call, monkeypatch: pytest.MonkeyPatch) -> None:
    import ibpred.run.chain.joint as joint

    asked = []
    real = joint.reduce_together

    def watched(members, wanted, *rest):
        asked.append(wanted)
        return real(members, wanted, *rest)

    monkeypatch.setattr(joint, "reduce_together", watched)
    call("--integral", "2,1,1,1", "--quiet")
    call("--integral", "1,2,1,1", "--integral", "2,1,1,1", "--quiet")
    assert asked == [((0, (2, 1, 1, 1)),), ((0, (1, 2, 1, 1)),)]


def test_tables_on_disk(call, tmp_path: Path) -> None:
    wanted = ("--max-rank", "2", "--integral", "1,1,0,0", "--quiet")
    code, out, _ = call(*wanted, "--json")
    table = json.loads(out)
    code, out, _ = call(*wanted, "--output", str(tmp_path / "t.jsonl"))
    assert (code, out) == (0, f"{len(table['reductions'])} rows written to {tmp_path / 't.jsonl'}\n")
    lines = [json.loads(line) for line in (tmp_path / "t.jsonl").read_text().splitlines()]
    assert lines == [{"family": "massless-box", **entry} for entry in table["reductions"]]
    code, out, _ = call(*wanted, "--output", str(tmp_path / "t.csv"), "--json")
    assert json.loads(out) == {"file": str(tmp_path / "t.csv"), "written": len(table["reductions"])}
    with (tmp_path / "t.csv").open(newline="") as stream:
        rows = list(csv.DictReader(stream))
    expected = []
    for entry in table["reductions"]:
        name = f"massless-box({','.join(map(str, entry['powers']))})"
        for term in entry["terms"]:
            master = f"massless-box({','.join(map(str, term['master']))})"
            expected.append({"integral": name, "master": master, "coefficient": term["coefficient"]})
        if not entry["terms"]:
            expected.append({"integral": name, "master": "", "coefficient": "0"})
    assert rows == expected


def test_a_table_is_checked_and_a_wrong_one_found(call, tmp_path: Path) -> None:
    code, _, err = call("--max-rank", "2", "--max-dots", "1", "--check", "25")
    assert code == 0
    assert "check: 25 of" in err
    assert "plan: 2 variables (d, t)" in err
    code, out, _ = call("--integral", "2,1,1,1", "--json", "--quiet")
    coefficient = json.loads(out)["reductions"][0]["terms"][-1]["coefficient"]
    _falsify(tmp_path / "work" / "store.sqlite", coefficient, coefficient.replace("5", "6"))
    code, _, err = call("--integral", "2,1,1,1", "--check", "1", "--quiet")
    assert code == 1
    assert "the table is wrong at massless-box(2,1,1,1)" in err


def _falsify(store: Path, old: str, new: str) -> None:
    """Change a coefficient in all rows, with the right checksum."""
    import hashlib
    import zlib

    database = sqlite3.connect(store, isolation_level=None)
    changed = 0
    for key, body in database.execute("select key, body from entry where kind = 'reduction'").fetchall():
        text = zlib.decompress(body).decode()
        if old in text:
            packed = zlib.compress(text.replace(old, new).encode())
            checksum = hashlib.sha256(packed).hexdigest()
            database.execute("update entry set body = ?, checksum = ? where key = ?", (packed, checksum, key))
            changed += 1
    database.close()
    assert changed


def test_sums(call, tmp_path: Path) -> None:
    (tmp_path / "one.txt").write_text("# a term\n(d-3)*s*massless-box(2,1,1,1)\n\n-2*massless-box(1,1,1,1)\n")
    (tmp_path / "two.txt").write_text("2*k^2*massless-box(1,1,1,1) # minus twice the first line\n")
    files = [x for name in ("one", "two") for x in ("--sum", str(tmp_path / f"{name}.txt"))]
    code, out, _ = call(*files, "--json", "--quiet")
    assert code == 0
    data = json.loads(out)
    assert list(data) == ["family", "masters", "sums"]
    assert [entry["name"] for entry in data["sums"]] == ["one", "two"]
    # the first line of the box is -k^2, so two.txt is -2 * box(0,1,1,1)
    code, out, _ = call("--integral", "0,1,1,1", "--json", "--quiet")
    (term,) = json.loads(out)["reductions"][0]["terms"]
    (ours,) = data["sums"][1]["terms"]
    assert ours["master"] == term["master"] == [0, 1, 0, 1]
    code, out, _ = call(*files, "--quiet")
    assert out.startswith("one = ")
    assert "\ntwo = " in out
    code, out, _ = call(*files, "--quiet", "--output", str(tmp_path / "sums.csv"))
    assert code == 0
    assert (tmp_path / "sums.csv").read_text().splitlines()[-1].startswith('two,"massless-box(0,1,0,1)",')


@pytest.mark.parametrize(
    ("content", "message"),
    [
        ("d*massless-box(1,1,1)", "s.txt:1: massless-box has 4 lines"),
        ("# nothing", "holds no term"),
        ("massless-box(1,1,1,1)\n\ns*massless-box(1,1,1,1)", "mass dimension"),
        ("massless-box(1,1,1,1)\nu*massless-box(1,1,1,1)", "s.txt:2: unknown symbol 'u'"),
    ],
)
def test_wrong_sums(call, tmp_path: Path, content: str, message: str) -> None:
    (tmp_path / "s.txt").write_text(content + "\n")
    code, out, err = call("--sum", str(tmp_path / "s.txt"), "--quiet")
    assert code == 2
    assert message in err
    assert out == ""


@pytest.mark.parametrize(
    ("options", "message"),
    [
        (("--integral", "1,1,1,1", "--output", "x.txt"), "is written as .jsonl or .csv"),
        (("--sum", "a.txt", "--integral", "1,1,1,1"), "--sum is a task of its own"),
        (("--sum", "missing.txt"), "cannot be read"),
        (("--integral", "1,1,1,1", "--cluster", "nowhere"), "no Dask scheduler answers at nowhere"),
        ((), "nothing to reduce"),
    ],
)
def test_wrong_options(call, monkeypatch: pytest.MonkeyPatch, options, message: str) -> None:
    if "--cluster" in options:
        pytest.importorskip("distributed")
        monkeypatch.setattr("ibpred.run.workers.cluster._SECONDS_TO_ANSWER", 1)
    code, _, err = call(*options, "--quiet")
    assert code == 2
    assert message in err
