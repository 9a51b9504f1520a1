"""What the Python interface returns: exact round trips through JSON, and what a notebook is shown."""

from __future__ import annotations

import dataclasses
import xml.etree.ElementTree as ET
from fractions import Fraction
from html.parser import HTMLParser
from pathlib import Path

import pytest

import ibpred
from ibpred.errors import InputError, OutOfTimeError, PointError
from ibpred.run.python import results
from ibpred.run.python.families import Families
from ibpred.run.python.family import Family
from ibpred.run.python.results import Result

FAMILIES = Path(__file__).parents[2] / "families"


@pytest.fixture(scope="module")
def box(tmp_path_factory: pytest.TempPathFactory) -> Family:
    return ibpred.load(FAMILIES / "massless-box.toml", work=tmp_path_factory.mktemp("box"), workers=1)


@pytest.fixture(scope="module")
def sunrise(tmp_path_factory: pytest.TempPathFactory) -> Family:
    return ibpred.load(FAMILIES / "sunrise-equal-masses.toml", work=tmp_path_factory.mktemp("sun"), workers=1)


@pytest.fixture(scope="module")
def vertices(tmp_path_factory: pytest.TempPathFactory) -> Families:
    names = ("planar-vertex", "crossed-vertex")
    files = [FAMILIES / f"{name}.toml" for name in names]
    return ibpred.load_all(files, work=tmp_path_factory.mktemp("vertices"), workers=1)


class Balanced(HTMLParser):
    def __init__(self) -> None:
        super().__init__()
        self.open: list[str] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        if tag not in {"br", "meta"}:
            self.open.append(tag)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        pass

    def handle_endtag(self, tag: str) -> None:
        assert self.open.pop() == tag


def check(result: Result) -> None:
    """The record survives JSON exactly; HTML is balanced; LaTeX is one display."""
    again = type(result).from_json(result.to_json())
    assert again == result
    assert again.to_json() == result.to_json()
    assert str(again) == str(result)
    page = Balanced()
    page.feed(result._repr_html_())
    page.close()
    assert not page.open
    latex = result._repr_latex_()
    assert latex == "" or (latex.startswith("$$\\begin{aligned}") and latex.endswith("\\end{aligned}$$"))
    assert latex.count("{") == latex.count("}")
    with pytest.raises(dataclasses.FrozenInstanceError):
        result.definition = None  # type: ignore[misc, assignment]


def test_sectors(box: Family) -> None:
    found = box.sectors()
    check(found)
    assert len(found.zero) + sum(map(len, found.classes)) == 16
    assert "16 sectors, of which 9 vanish" in found._repr_html_()


def test_masters(box: Family) -> None:
    found = box.masters()
    check(found)
    assert "massless-box(1,1,1,1)" in found._repr_html_()
    assert "<svg" in found._repr_html_()


def test_reductions(box: Family) -> None:
    found = box.reduce([(2, 1, 1, 1), (1, 1, 1, -1), (1, 0, 0, 0)])
    check(found)
    assert str(found).splitlines()[2] == "massless-box(1,0,0,0) = 0"
    again = results.ReductionResult.from_json(found.to_json())
    assert dict(again.reductions[2, 1, 1, 1])[2] == dict(found.reductions[2, 1, 1, 1])[2]


def test_differential_equation(box: Family) -> None:
    found = box.differential_equation()
    check(found)
    assert found.masters == box.masters().masters
    for drawn in found._repr_html_().split("<math")[1:]:
        ET.fromstring("<math" + drawn.split("</math>")[0] + "</math>")


def test_forms(box: Family, sunrise: Family) -> None:
    form, obstructed = box.epsilon_form(), sunrise.epsilon_form()
    assert isinstance(form, results.FormResult)
    assert isinstance(obstructed, results.ObstructedResult)
    check(form)
    check(obstructed)
    assert "elliptic curve" in obstructed._repr_html_()


def test_solution(box: Family) -> None:
    found = box.solve(weight=2)
    check(found)
    assert found.is_pure()


def test_values(box: Family) -> None:
    found = box.evaluate({"s": 1, "t": "-1/3"}, [(1, 1, 1, 1)], digits=20, order=1)
    check(found)
    (value,) = found
    assert (len(found), found[0]) == (1, value)
    assert value.epsilon[-2].re == "-12"
    assert max(value.epsilon) == 1
    assert found.point == {"s": 1, "t": Fraction(-1, 3)}


def test_grid(box: Family) -> None:
    found = box.grid({"t": ["-1/2", 0, "-1/3"]}, {"s": -1}, [(1, 1, 1, 1)], digits=10)
    check(found)
    assert [place.point["t"] for place in found.points] == [Fraction(-1, 2), Fraction(-1, 3)]
    assert found.left_out[0][0]["t"] == 0
    assert "<svg" in found._repr_html_()
    single = box.evaluate({"s": -1, "t": "-1/3"}, [(1, 1, 1, 1)], digits=10)
    assert found.points[1].values[0].epsilon[-2] == single[0].epsilon[-2]


def test_expansion(box: Family) -> None:
    found = box.expansion("t", 0, -1, {"s": -1}, [(0, 1, 0, 1)], digits=10, terms=1)
    check(found)
    # bubble in t = -h: 1/eps + 2 - log(h) + ...
    terms = found.expansions[0].epsilon
    none = Fraction(0)
    assert float(terms[-1][none, 0].re) == 1
    assert float(terms[0][none, 1].re) == -1
    assert float(terms[0][none, 0].re) == pytest.approx(2)


def test_sums(box: Family) -> None:
    found = box.reduce_sums({"zero": "massless-box(1,0,1,0) - massless-box(1,0,1,0) + massless-box(0,1,0,1)"})
    check(found)
    assert [index for index, _ in found.sums["zero"]] == [1]
    with pytest.raises(InputError, match="mine:2"):
        box.reduce_sums({"mine": "massless-box(1,0,1,0)\nnonsense("})


def test_several_families(vertices: Families) -> None:
    masters = vertices.masters()
    check(masters)
    assert len(masters.masters) == 4
    found = vertices.reduce(["crossed-vertex(1,1,1,1,1,1,-1)", "planar-vertex(1,1,1,1,1,1,0)"])
    check(found)
    assert {number for number, _ in found.masters} == {0, 1}
    total = vertices.reduce_sums({"both": "s*planar-vertex(1,1,1,1,1,1,0)\ncrossed-vertex(1,1,1,1,1,1,-1)"})
    check(total)
    second, first = (dict(combination) for combination in found.reductions.values())
    for index, value in total.sums["both"]:
        zero = value - value
        assert first.get(index, zero) * value.ring.variable("s") + second.get(index, zero) == value
    assert vertices["planar-vertex"].masters().masters
    assert [family.definition.name for family in vertices] == ["planar-vertex", "crossed-vertex"]


def test_preferred_masters(tmp_path: Path) -> None:
    family = ibpred.load(FAMILIES / "massless-box.toml", tmp_path, 1, masters=[(2, 1, 1, 1)])
    assert (2, 1, 1, 1) in family.masters().masters
    assert (1, 1, 1, 1) not in family.masters().masters


def test_time_allowed(tmp_path: Path) -> None:
    family = ibpred.load(FAMILIES / "massless-box.toml", tmp_path, 1)
    with pytest.raises(OutOfTimeError, match="same command goes on"):
        family.within(0).masters()
    assert len(family.masters().masters) == 3


def test_foreign_text(box: Family) -> None:
    text = box.masters().to_json()
    with pytest.raises(InputError, match="MastersResult, not a SolutionResult"):
        results.SolutionResult.from_json(text)
    for wrong in ("", "[]", "{}", text.replace('"masters"', '"misters"')):
        with pytest.raises(InputError):
            results.MastersResult.from_json(wrong)


def test_wrong_arguments(box: Family) -> None:
    with pytest.raises(InputError, match="side"):
        box.expansion("t", 0, 2, {"s": -1})
    with pytest.raises(PointError):
        box.grid({"u": [1, 2]}, {"s": -1, "t": -1})
    with pytest.raises(InputError, match="no family file"):
        ibpred.load_all([])
