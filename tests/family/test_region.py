"""The region in which the user wants a family solved."""

from __future__ import annotations

from pathlib import Path

import pytest

from ibpred.errors import FamilyFileError
from ibpred.family.reading import read_family
from ibpred.family.signs import euclidean_signs, region_signs

FAMILIES = Path(__file__).parents[2] / "families"


def with_region(name, entry):
    text = (FAMILIES / f"{name}.toml").read_text(encoding="utf-8")
    return read_family(text.replace("[kinematics]\n", f"[kinematics]\nregion = {entry}\n"), "f.toml", name)


def test_the_usual_region():
    box = with_region("massless-box", "[]")
    assert region_signs(box) == euclidean_signs(box) == {"s": -1, "t": -1}
    crossed = with_region("crossed-double-box", "[]")
    assert euclidean_signs(crossed) is None
    assert region_signs(crossed) == {"s": 1, "t": -1}


def test_a_region_that_is_asked_for():
    assert region_signs(with_region("massless-box", '["s > 0"]')) == {"s": 1, "t": -1}
    assert region_signs(with_region("massless-box", '["t>0", " s <0 "]')) == {"s": -1, "t": 1}
    assert region_signs(with_region("triangle-massive-loop", '["s > 0"]')) == {"s": 1, "m2": 1}


@pytest.mark.parametrize(
    ("name", "entry", "problem"),
    [
        ("massless-box", '["s > 1"]', "write signs of invariants"),
        ("massless-box", '["z > 0"]', "no invariant"),
        ("massless-box", '["s > 0", "s < 0"]', "given twice"),
        ("massless-box", '"s > 0"', "list of texts"),
        ("triangle-massive-loop", '["m2 < 0"]', "squared mass m2 is positive"),
        ("bubble", '["s > 0"]', "no ratio"),
    ],
)
def test_errors_name_the_entry(name, entry, problem):
    with pytest.raises(FamilyFileError, match=problem) as caught:
        with_region(name, entry)
    assert caught.value.line is not None


def test_variables_say_themselves_where_they_hold():
    text = (FAMILIES / "triangle-massive-loop.toml").read_text(encoding="utf-8")
    text = text.replace("[kinematics]\n", '[kinematics]\nregion = ["s > 0"]\n')
    with pytest.raises(FamilyFileError, match="either a region or"):
        read_family(text + '\n[variables]\nx = "s = -m2*(1-x)^2/x"\n', "f.toml", "f")
