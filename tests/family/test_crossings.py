"""Crossings: the induced substitution of the invariants, and clear refusals."""

from __future__ import annotations

from fractions import Fraction

import pytest

from ibpred.errors import FamilyFileError
from ibpred.family.crossings import crossed
from ibpred.family.polynomials import symanzik
from ibpred.family.reading import read_family

BOX = """
[momenta]
loop = ["k"]
external = ["p1", "p2", "p3"]
[kinematics]
invariants = {{ s = 2, t = 2, m2 = 2 }}
equations = ["p1^2 = {mass}", "p2^2 = 0", "p3^2 = 0", "(p1+p2)^2 = s", "(p2+p3)^2 = t", "(p1+p2+p3)^2 = 0"]
[[line]]
momentum = "k"
[[line]]
momentum = "k+p1"
mass2 = "m2"
[[line]]
momentum = "k+p1+p2"
[[line]]
momentum = "k+p1+p2+p3"
[crossings]
{crossings}
"""


def box(crossings: str, mass: str = "0"):
    return read_family(BOX.format(crossings=crossings, mass=mass), "box.toml", "box")


def test_invariants_of_a_crossed_box() -> None:
    family = box('u = { p1 = "p2", p2 = "p1" }\nx = { p1 = "p3", p3 = "p1" }\ny={p3 = "-p1-p2-p3"}')
    u, x, y = family.crossings
    assert [str(v) for v in u.invariants] == ["s", "-s-t", "m2"]
    assert [str(v) for v in x.invariants] == ["t", "s", "m2"]
    assert [str(v) for v in y.invariants] == ["s", "-s-t", "m2"]
    assert u.momenta[0] == (Fraction(0), Fraction(1), Fraction(0))


def test_external_mass_stays() -> None:
    (u,) = box('u = { p2 = "p3", p3 = "p2" }', mass="m2").crossings
    # (p1+p3)^2 = sum of squares - s - t
    assert [str(v) for v in u.invariants] == ["-s-t+m2", "t", "m2"]


def test_crossed_family_is_the_family_at_crossed_invariants() -> None:
    """U and F of the crossed lines against those of the family with the invariants replaced."""
    family = box('u = { p1 = "p2", p2 = "p1" }')
    other = crossed(family, family.crossings[0])
    assert other.name == "box.u"
    images = dict(zip(("s", "t", "m2"), family.crossings[0].invariants, strict=True))
    for ours, theirs in zip(symanzik(other), symanzik(family), strict=True):
        moved = {e: str(v.substitute(images)) for e, v in theirs.terms.items()}
        assert {e: str(v) for e, v in ours.terms.items()} == moved
    # the same lines written down by hand
    text = BOX.format(crossings='u = { p1 = "p2", p2 = "p1" }', mass="0")
    by_hand = read_family(text.replace('momentum = "k+p1"', 'momentum = "k+p2"'), "box.toml", "box")
    for line, wanted in zip(other.lines, by_hand.lines, strict=True):
        assert (line.momentum, line.linear, line.constant) == (
            wanted.momentum,
            wanted.linear,
            wanted.constant,
        )


@pytest.mark.parametrize(
    ("crossings", "mass", "message"),
    [
        ('u = { p4 = "p1" }', "0", "'p4' is no independent external momentum"),
        ('u = { p1 = "p5" }', "0", "did you mean"),
        ('u = { p1 = "k" }', "0", "unknown"),
        ('u = { p1 = "p2" }', "0", "cannot be undone"),
        ('u = { p1 = "p2", p2 = "p1" }', "m2", "changes the kinematics: the square of external momentum 1"),
        ('u = { p1 = "-p1" }', "0", "the square of the dependent leg"),
        ('u = { p1 = "2*p1" }', "0", "changes the kinematics"),
        ('u = { p1 = "s" }', "0", "combination of external momenta"),
        ('u = { p1 = "s*p2" }', "0", "combination of external momenta"),
        ("u = {}", "0", "says what momenta become"),
        ('"1u" = { p1 = "p2" }', "0", "is no name"),
        ("u = { p1 = 2 }", "0", "must be a text in quotes"),
    ],
)
def test_refusals(crossings: str, mass: str, message: str) -> None:
    with pytest.raises(FamilyFileError, match=message) as caught:
        box(crossings, mass)
    assert caught.value.line == BOX.splitlines().index("[crossings]") + 2


def test_no_table() -> None:
    text = "crossings = 3\n" + BOX.format(crossings="", mass="0").replace("[crossings]", "")
    with pytest.raises(FamilyFileError, match="must be a table"):
        read_family(text, "box.toml", "box")
