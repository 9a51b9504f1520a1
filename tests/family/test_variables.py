"""The section [variables] of a family file."""

from __future__ import annotations

import pytest

from ibpred.errors import FamilyFileError
from ibpred.family.reading import read_family

BUBBLE = """
[momenta]
loop = ["k"]
external = ["p"]
[kinematics]
invariants = { s = 2, m2 = 2 }
equations = ["p^2 = s"]
unit = "m2"
[[line]]
momentum = "k"
mass2 = "m2"
[[line]]
momentum = "k+p"
mass2 = "m2"
"""


def read(variables: str):
    return read_family(f"{BUBBLE}[variables]\n{variables}\n", "bubble.toml", "bubble")


def test_a_variable_in_place_of_an_invariant() -> None:
    (change,) = read('x = "s = -m2*(1-x)^2/x"').variables
    assert (change.name, change.invariant, change.text) == ("x", "s", "-m2*(1-x)^2/x")
    x, m2 = (change.value.ring.variable(n) for n in ("x", "m2"))
    assert change.value == -m2 * (1 - x) ** 2 / x
    assert read("").variables == ()


@pytest.mark.parametrize(
    ("entry", "problem"),
    [
        ('x = "-m2*x"', "write an equation"),
        ('x = "t = -m2*x"', "no invariant"),
        ('x = "m2 = s*x"', "is the unit"),
        ('x = "s = -m2*(1-x"', "character"),
        ('x = "s = m2"', "does not depend on x"),
        ('x = "s = m2^2*x"', "mass dimension 2"),
        ('x = "s = m2*x"\ny = "s = m2*y"', "replaced twice"),
        ('s = "s = m2*s"', "given twice"),
        ("x = 3", "text in quotes"),
    ],
)
def test_mistakes_are_named(entry: str, problem: str) -> None:
    with pytest.raises(FamilyFileError, match=problem) as caught:
        read(entry)
    assert caught.value.line is not None
