"""Whatever is wrong with the input: one clear message, the right exit code, nothing half written."""

from __future__ import annotations

import os
from collections.abc import Callable
from pathlib import Path

import pytest

from ibpred.cli.common import guarded
from ibpred.cli.main import group

FAMILIES = Path(__file__).parents[2] / "families"
BOX = (FAMILIES / "massless-box.toml").read_text(encoding="utf-8")

Run = Callable[..., tuple[int, str, str]]


@pytest.fixture
def ibpred(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> Run:
    def run(*arguments: str, work: Path | None = None) -> tuple[int, str, str]:
        words = [*arguments, "--work", str(work or tmp_path / "work"), "--quiet"]
        code = guarded(lambda: group.main(args=words, standalone_mode=False))
        out, err = capsys.readouterr()
        return code, out, err

    return run


def check(outcome: tuple[int, str, str], code: int, *parts: str) -> None:
    found, out, err = outcome
    assert found == code
    assert out == ""
    assert err.startswith("ibpred: ") or err.startswith("Usage:")
    assert "Traceback" not in err
    for part in parts:
        assert part in err


def family(folder: Path, old: str, new: str) -> str:
    assert old in BOX
    path = folder / "changed.toml"
    path.write_text(BOX.replace(old, new, 1), encoding="utf-8")
    return str(path)


@pytest.mark.parametrize(
    ("old", "new", "parts"),
    [
        ('"(p1+p2)^2 = s"', '"(p1+p2)^2 = S"', ("changed.toml:", "'S'")),
        ('momentum = "k+p1"', 'momentum = "k+P1"', ("changed.toml:", "'P1'", "p1")),
        ('momentum = "k+p1+p2"', 'momentum = "-k-p1"', ("changed.toml:", "depend")),
        ('"p2^2 = 0"', '"p2^2 = 0", "p2^2 = s"', ("changed.toml:", "p2")),
        ('"p2^2 = 0", ', "", ("changed.toml:", "p2")),
        ("[kinematics]", "[kinematic]", ("changed.toml:", "kinematics")),
        ('unit = "s"', 'unit = "q"', ("changed.toml:", "q")),
        ("s = 2", "s = 3", ("changed.toml:", "dimension")),
        ("[momenta]", "[momenta", ("changed.toml",)),
    ],
)
def test_family_file(ibpred: Run, tmp_path: Path, old: str, new: str, parts: tuple[str, ...]) -> None:
    check(ibpred("masters", family(tmp_path, old, new)), 2, *parts)
    assert not (tmp_path / "work").exists()


def test_missing_family_file(ibpred: Run, tmp_path: Path) -> None:
    check(ibpred("masters", str(tmp_path / "none.toml")), 2, "none.toml", "cannot be read")


@pytest.mark.parametrize(
    ("powers", "part"),
    [("1,1,1", "4 powers are needed, 3 are given"), ("1,1,x,1", "no integral"), ("", "no integral")],
)
def test_integral(ibpred: Run, powers: str, part: str) -> None:
    check(ibpred("reduce", str(FAMILIES / "massless-box.toml"), "--integral", powers), 2, part)


def test_positive_numerator(ibpred: Run) -> None:
    outcome = ibpred("reduce", str(FAMILIES / "planar-double-box.toml"), "--integral", "1,1,1,1,1,1,1,1,0")
    check(outcome, 2, "numerator")


def test_list_file(ibpred: Run, tmp_path: Path) -> None:
    path = tmp_path / "list.txt"
    path.write_text("1,1,1,1  # the box\n1,1,one,1\n")
    check(ibpred("reduce", str(FAMILIES / "massless-box.toml"), "--list", str(path)), 2, "list.txt:2")
    check(
        ibpred("reduce", str(FAMILIES / "massless-box.toml"), "--list", str(path) + "x"), 2, "cannot be read"
    )


def test_nothing_to_reduce(ibpred: Run) -> None:
    check(ibpred("reduce", str(FAMILIES / "massless-box.toml")), 2, "nothing to reduce")


@pytest.mark.parametrize(
    ("at", "part"),
    [
        ("s=-1", "lacks a value for t"),
        ("s=-1,t=-1/3,m2=1", "'m2'"),
        ("s=-1,t", "NAME=NUMBER"),
        ("s=-1,t=1/0", "division by zero"),
        ("s=-1,t=-1,t=-2", "twice"),
        ("s=-1,t=x", "unknown symbol 'x'"),
        ("s=-1,t=0", "singular"),
    ],
)
def test_point(ibpred: Run, at: str, part: str) -> None:
    check(ibpred("evaluate", str(FAMILIES / "massless-box.toml"), "--at", at), 2, part)


@pytest.mark.skipif(os.geteuid() == 0, reason="the superuser may write everywhere")
def test_read_only_work_folder(ibpred: Run, tmp_path: Path) -> None:
    folder = tmp_path / "closed"
    folder.mkdir(mode=0o500)
    check(ibpred("masters", str(FAMILIES / "massless-box.toml"), work=folder / "w"), 2, "--work")


def test_work_folder_that_is_a_file(ibpred: Run, tmp_path: Path) -> None:
    (tmp_path / "file").write_text("")
    check(ibpred("masters", str(FAMILIES / "massless-box.toml"), work=tmp_path / "file"), 2, "--work")


def test_output_folder_that_is_a_file(ibpred: Run, tmp_path: Path) -> None:
    (tmp_path / "file").write_text("kept")
    outcome = ibpred("run", str(FAMILIES / "bubble.toml"), "--output", str(tmp_path / "file"))
    check(outcome, 2, "--output")
    assert (tmp_path / "file").read_text() == "kept"


def test_damaged_store(ibpred: Run, tmp_path: Path) -> None:
    (tmp_path / "work").mkdir()
    (tmp_path / "work" / "store.sqlite").write_bytes(b"no database, though it is long enough to be one" * 99)
    check(ibpred("masters", str(FAMILIES / "massless-box.toml")), 1, "damaged", "--work")


def test_family_without_masters(ibpred: Run, tmp_path: Path) -> None:
    path = tmp_path / "scaleless.toml"
    path.write_text(
        'title = "scaleless"\n[momenta]\nloop = ["k"]\nexternal = ["p"]\n[kinematics]\n'
        'equations = ["p^2 = 0"]\n[[line]]\nmomentum = "k"\n[[line]]\nmomentum = "k+p"\n'
    )
    check(ibpred("masters", str(path)), 2, "scaleless")


def test_unknown_command_and_option(ibpred: Run) -> None:
    check(ibpred("master", str(FAMILIES / "bubble.toml")), 2)
    check(ibpred("masters", str(FAMILIES / "bubble.toml"), "--colour"), 2)
