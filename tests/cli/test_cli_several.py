"""Commands on several family files: shared masters, crossings, cuts, clear refusals."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from ibpred.cli.common import guarded, parse_integral
from ibpred.cli.main import group
from ibpred.errors import InputError

FAMILIES = Path(__file__).parents[2] / "families"


@pytest.fixture
def call(tmp_path: Path, capsys: pytest.CaptureFixture[str]):
    """Run a command on copies of shipped families; exit code, standard output, standard error."""

    def run(command: str, *names: str, options: tuple[str, ...] = (), more: str = "") -> tuple[int, str, str]:
        files = []
        for name in names:
            file = tmp_path / f"{name}.toml"
            text = (FAMILIES / f"{name}.toml").read_text(encoding="utf-8")
            file.write_text(text + more, encoding="utf-8")
            files.append(str(file))
        arguments = [command, *files, "--quiet", "--work", str(tmp_path / "work"), *options]
        code = guarded(lambda: group.main(arguments, standalone_mode=False))
        printed = capsys.readouterr()
        return code, printed.out, printed.err

    return run


def test_masters_of_two_families(call) -> None:
    code, out, _ = call("masters", "planar-vertex", "crossed-vertex", options=("--json",))
    assert code == 0
    data = json.loads(out)
    assert data["families"] == ["planar-vertex", "crossed-vertex"]
    assert data["count"] == len(data["masters"]) == 4
    assert data["masters"][-1] == {"family": "crossed-vertex", "powers": [1, 1, 1, 1, 1, 1, 0], "lines": 6}
    assert [m["family"] for m in data["masters"][:3]] == ["planar-vertex"] * 3


def test_reduction_to_common_masters(call) -> None:
    wanted = ("--integral", "crossed-vertex(1,1,1,1,1,0,0)")
    code, out, _ = call("reduce", "planar-vertex", "crossed-vertex", options=(*wanted, "--json"))
    assert code == 0
    (reduction,) = json.loads(out)["reductions"]
    assert (reduction["family"], reduction["powers"]) == ("crossed-vertex", [1, 1, 1, 1, 1, 0, 0])
    (term,) = reduction["terms"]
    assert term["master"] == {"family": "planar-vertex", "powers": [0, 1, 1, 1, 0, 0, 0]}
    code, out, _ = call("reduce", "planar-vertex", "crossed-vertex", options=wanted)
    assert out.startswith("crossed-vertex(1,1,1,1,1,0,0) = ")
    assert out.endswith("planar-vertex(0,1,1,1,0,0,0)\n")


def test_one_family_by_cuts_and_whole(call) -> None:
    wanted = ("--integral", "2,1,1,1", "--max-dots", "1", "--max-rank", "0", "--json")
    whole = call("reduce", "massless-box", options=wanted)
    parts = call("reduce", "massless-box", options=(*wanted, "--by-cuts"))
    assert whole == parts
    assert whole[0] == 0
    data = json.loads(whole[1])
    assert list(data) == ["family", "masters", "reductions"]
    assert data["masters"] == [[1, 0, 1, 0], [0, 1, 0, 1], [1, 1, 1, 1]]
    assert data["reductions"][0]["powers"] == [2, 1, 1, 1]
    assert data["reductions"][0]["terms"][0]["master"] == [0, 1, 0, 1]


def test_crossed_integral(call) -> None:
    more = '[crossings]\nu = { p1 = "p2", p2 = "p1" }\n'
    options = ("--integral", "massless-box.u(2,1,1,1)", "--json")
    code, out, _ = call("reduce", "massless-box", options=options, more=more)
    assert code == 0
    (reduction,) = json.loads(out)["reductions"]
    assert (reduction["family"], reduction["crossing"]) == ("massless-box", "u")
    assert reduction["terms"][-1]["master"] == {
        "family": "massless-box",
        "crossing": "u",
        "powers": [1, 1, 1, 1],
    }


@pytest.mark.parametrize(
    ("names", "options", "message"),
    [
        (("massless-box", "planar-vertex"), ("--integral", "1,1,1,1"), "the numbers of loops differ"),
        (("massless-box", "bubble"), ("--integral", "1,1"), "the external momenta differ"),
        (("planar-vertex", "crossed-vertex"), ("--integral", "1,1,1,1,1,1,0"), "there are several families"),
        (("planar-vertex", "crossed-vertex"), ("--integral", "planer-vertex(1,1)"), "did you mean"),
        (("massless-box",), ("--integral", "massless-box(1,1)"), "4 powers are needed"),
        (("massless-box",), ("--integral", "massless-box(1,a)"), "is no integral"),
    ],
)
def test_refusals(call, names, options, message) -> None:
    code, out, err = call("reduce", *names, options=options)
    assert code == 2
    assert message in err
    assert out == ""


def test_integral_texts() -> None:
    assert parse_integral("1, 1,-1", "x") == (None, (1, 1, -1))
    assert parse_integral(" box.u(1,0) ", "x") == ("box.u", (1, 0))
    assert parse_integral("(1,0)", "x") == (None, (1, 0))
    with pytest.raises(InputError, match="is no integral"):
        parse_integral("box(1", "x")


def test_commands_for_one_family_after_the_other(call) -> None:
    names = ("triangle-one-leg", "bubble")
    code, out, err = call("diffeq", *names, options=("--json",))
    assert code == 0, err
    data = json.loads(out)["families"]
    assert [each["family"] for each in data] == list(names)
    code, single, _ = call("diffeq", "bubble", options=("--json",))
    assert (code, json.loads(single)) == (0, data[1])
    code, out, err = call("evaluate", *names, options=("--json", "--at", "s=-1", "--digits", "10"))
    assert code == 0, err
    first, second = json.loads(out)["families"]
    # the one master of the triangle is the bubble
    assert first["integrals"][0]["epsilon"] == second["integrals"][0]["epsilon"]


def test_masters_of_several_families_name_theirs(call) -> None:
    code, _, err = call("diffeq", "bubble", "triangle-one-leg", options=("--master", "1,1"))
    assert code == 2
    assert "names none of the families bubble, triangle-one-leg" in err
    words = ("--json", "--master", "bubble(2,1)")
    code, out, err = call("diffeq", "bubble", "triangle-one-leg", options=words)
    assert code == 0, err
    assert json.loads(out)["families"][0]["masters"] == [[2, 1]]


def test_integrals_of_several_families_are_evaluated_one_by_one(call) -> None:
    words = ("--at", "s=-1", "--integral", "1,1")
    code, _, err = call("evaluate", "bubble", "triangle-one-leg", options=words)
    assert code == 2
    assert "of several families the masters are evaluated" in err
