"""The option --master: preferred masters through the commands that use masters."""

from __future__ import annotations

import json
import shutil
from pathlib import Path

import pytest

from ibpred.cli.common import guarded
from ibpred.cli.main import group

FAMILY = Path(__file__).parents[2] / "families" / "sunrise-equal-masses.toml"


@pytest.fixture
def call(tmp_path: Path, capsys: pytest.CaptureFixture[str]):
    """Run a command on a copy of the family; exit code, standard output, standard error."""
    file = shutil.copy(FAMILY, tmp_path)

    def run(command: str, *options: str) -> tuple[int, str, str]:
        arguments = [command, str(file), "--quiet", "--json", *options]
        code = guarded(lambda: group.main(arguments, standalone_mode=False))
        printed = capsys.readouterr()
        return code, printed.out, printed.err

    return run


def test_all_commands_use_the_preferred_masters(call) -> None:
    def answer(*arguments: str) -> dict:
        code, out, err = call(*arguments)
        assert code == 0, err
        return json.loads(out)

    wish = ("--master", "2,1,1,0,0", "--master", "sunrise-equal-masses(3,1,1,0,0)")
    expected = [[1, 1, 0, 0, 0], [2, 1, 1, 0, 0], [3, 1, 1, 0, 0]]
    assert [m["powers"] for m in answer("masters", *wish)["masters"]] == expected
    assert answer("diffeq", *wish)["masters"] == expected
    reduced = answer("reduce", "--integral", "1,1,1,0,0", *wish)
    assert reduced["masters"] == expected
    assert reduced["reductions"][0]["terms"]
    # the store keeps both choices apart
    usual = answer("masters")["masters"]
    assert [1, 1, 1, 0, 0] in [m["powers"] for m in usual]


@pytest.mark.parametrize(
    ("powers", "words"),
    [
        ("0,0,1,0,0", "scaleless"),
        ("1,1,1", "5 powers are needed"),
        ("box(2,1,1,0,0)", "does not belong to the family"),
        ("4,x", "is no integral"),
        # lines 1 and 3 alone are two tadpoles, as lines 1 and 2 are
        ("2,0,1,0,0", "equals that of sunrise-equal-masses(1,1,0,0,0)"),
    ],
)
def test_wrong_preferences_are_bad_input(call, powers: str, words: str) -> None:
    code, out, err = call("masters", "--master", powers)
    assert (code, out) == (2, "")
    assert words in err
