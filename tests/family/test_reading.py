from fractions import Fraction
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ibpred.exact.grammar import parse_rational
from ibpred.family.definition import FamilyDefinition, Graph
from ibpred.family.lines import RowSpace, product_row
from ibpred.family.reading import read_family

FOLDER = Path(__file__).parents[2] / "families"


def shipped(name: str) -> FamilyDefinition:
    path = FOLDER / f"{name}.toml"
    return read_family(path.read_text(), path.name, path.stem)


def test_box() -> None:
    family = shipped("massless-box")
    ring = family.kinematic_ring
    assert family.name == "massless-box"
    assert family.title == "One-loop massless box"
    assert family.loops == ("k",)
    assert family.external == ("p1", "p2", "p3")
    assert [(v.name, v.dimension) for v in family.invariants] == [("s", 2), ("t", 2)]
    assert (family.unit, family.dimension) == ("s", 4)
    assert family.graph == Graph(((1, 2), (2, 3), (3, 4), (4, 1)), (("p1", 2), ("p2", 3), ("p3", 4)), 1)
    half_s, half_t = parse_rational("s/2", ring), parse_rational("t/2", ring)
    zero = ring.zero
    assert family.gram == (
        (zero, half_s, -half_s - half_t),
        (half_s, zero, half_t),
        (-half_s - half_t, half_t, zero),
    )
    third = family.lines[2]  # -(k + p1 + p2)^2
    assert third.momentum == (1, 1, 1, 0)
    assert third.quadratic == ((-1,),)
    assert third.linear == ((-2, -2, 0),)
    assert third.constant == -ring.variable("s")
    assert (third.cut, third.numerator, bool(third.mass2)) == (False, False, False)
    assert family.propagators == (0, 1, 2, 3)


def test_a_mass_is_added_and_kept() -> None:
    family = shipped("bubble-one-mass")
    ring = family.kinematic_ring
    assert family.lines[1].mass2 == ring.variable("m2")
    assert family.lines[1].constant == ring.variable("m2") - ring.variable("s")
    assert family.internal_ring.names == ("d", "s")
    assert family.full_ring.names == ("d", "s", "m2")


@pytest.mark.parametrize("path", sorted(FOLDER.glob("*.toml")), ids=lambda path: path.stem)
def test_shipped_families_are_complete(path: Path) -> None:
    """As many independent lines as scalar products with a loop momentum."""
    family = shipped(path.stem)
    loops, legs = len(family.loops), len(family.external)
    assert len(family.lines) == loops * (loops + 1) // 2 + loops * legs
    rows = RowSpace()
    assert all(rows.add(product_row(line)) is None for line in family.lines)
    assert family.title != path.stem
    assert len(family.title) < 60


def test_completed_numerators_follow_the_shifts_of_the_family() -> None:
    """Without its numerators the planar double box gets the ones that its file names."""
    text = (FOLDER / "planar-double-box.toml").read_text()
    parts = [part for part in text.split("[[line]]") if "numerator" not in part]
    bare = read_family("[[line]]".join(parts), "b.toml", "planar-double-box")
    assert bare == shipped("planar-double-box")


def test_completed_numerators_are_squares_or_products() -> None:
    assert [line.text for line in shipped("sunrise").lines[3:]] == ["k1-k2", "k1+p"]
    text = """
[momenta]
loop = ["k1", "k2"]
external = ["v"]
[kinematics]
invariants = { w = 1 }
equations = ["v^2 = 1"]
[[line]]
momentum = "k1"
[[line]]
momentum = "k1-k2"
[[line]]
expression = "-2*k1*v - w"
"""
    family = read_family(text, "h.toml", "h")
    assert [line.text for line in family.lines[3:]] == ["k2", "-k2*v"]
    assert [line.dimension for line in family.lines] == [2, 2, 1, 2, 1]
    assert all(line.numerator for line in family.lines[3:])
    assert family.lines[4].linear == ((0,), (-1,))


def test_expressions_are_expanded() -> None:
    text = (FOLDER / "massless-box.toml").read_text()
    given = text.replace('momentum = "k+p1+p2"', 'expression = "-(k+p1)^2 - 2*k*p2 - 2*p1*p2 - p2^2"')
    squared, expanded = shipped("massless-box").lines[2], read_family(given, "b.toml", "b").lines[2]
    assert expanded.momentum is None
    for field in ("quadratic", "linear", "constant", "dimension"):
        assert getattr(expanded, field) == getattr(squared, field)


def test_options_of_a_line() -> None:
    text = (FOLDER / "massless-box.toml").read_text()
    text += "cut = true\n"
    family = read_family("dimension = 6\n" + text, "b.toml", "b")
    assert family.dimension == 6
    assert [line.cut for line in family.lines] == [False, False, False, True]
    numerator = read_family(text.replace("cut", "numerator"), "b.toml", "b")
    assert numerator.propagators == (0, 1, 2)


def test_defaults() -> None:
    """No title, no unit: the name and the first invariant that can be the unit."""
    text = '[momenta]\nloop=["k"]\n[kinematics]\ninvariants={s=2,m=1}\n[[line]]\nmomentum="k"\nmass2="m^2+s"'
    family = read_family(text, "v.toml", "v")
    assert (family.title, family.unit, family.external, family.gram) == ("v", "m", (), ())
    none = read_family('[momenta]\nloop=["k"]\n[kinematics]\n[[line]]\nmomentum="k"', "v.toml", "scaleless")
    assert none.unit is None
    assert none.full_ring is none.internal_ring


@pytest.mark.parametrize(
    "equations",
    [
        '"p1^2 = 0", "p2^2 = 0", "2*p1*p2 = s"',
        '"p1*p1 = 0", "p2*p2 = 0", "p1*p2 = s/2"',
        '"p1**2 = p2^2", "(p1-p2)^2 = -s", "0 = (p1+p2)*(p1-p2) + p2*p2", "p1*(p1+p2) = s/2"',
        '"p1^2 = 0", "p2^2 = 0", "p1*p2/s = 1/2", "s*p1*p2 = s^2/2"',
    ],
)
def test_equations_in_many_forms(equations: str) -> None:
    text = f"""
momenta = {{ loop = ["k"], external = ["p1", "p2"] }}
kinematics = {{ invariants = {{ s = 2 }}, equations = [{equations}] }}
line = [{{ momentum = "k" }}, {{ momentum = "k+p1" }}, {{ momentum = "k+p1+p2" }}]
"""
    assert read_family(text, "t.toml", "t").gram == shipped("triangle-one-leg").gram


def test_vectors_without_mass_dimension() -> None:
    """Two velocities with v1.v2 = y and a dimensionless invariant; the second by explicit declaration."""
    text = """
[momenta]
loop = ["k"]
external = ["v", "n"]
[kinematics]
invariants = { y = 0, w = 1 }
equations = ["v^2 = 1", "n^2 = 0", "v*n = y"]
dimensions = { n = 0 }
[[line]]
momentum = "k"
[[line]]
expression = "-2*k*v - w"
[[line]]
expression = "-2*k*n - w"
"""
    family = read_family(text, "h.toml", "h")
    assert family.unit == "w"
    assert family.gram[0][0].is_one()
    assert [line.dimension for line in family.lines] == [2, 1, 1]


def test_graph_names_its_own_momenta() -> None:
    """Without [momenta] loops are k1, k2, ... and the last leg depends on the others."""
    text = """
[kinematics]
invariants = { s = 2 }
equations = ["p^2 = s"]
[[edge]]
joins = [1, 2]
[[edge]]
joins = [1, 2]
[[edge]]
joins = [2, 1]
[legs]
p = 1
q = 2
"""
    family = read_family(text, "g.toml", "g")
    assert (family.loops, family.external) == (("k1", "k2"), ("p",))
    assert [line.text for line in family.lines[:3]] == ["k1", "k2", "k1+k2-p"]
    assert family.graph is not None
    assert family.graph.legs == (("p", 1),)
    assert family.graph.rest == 2


def test_graph_infers_where_the_dependent_leg_is() -> None:
    """Only one vertex of the box has two ends without it; masses, cuts and numerators come along."""
    text = (FOLDER / "massless-box.toml").read_text().split("[[line]]")[0]
    for a, b in [(1, 2), (2, 3), (3, 4), (4, 1)]:
        text += f"[[edge]]\njoins = [{a}, {b}]\n"
    text = text.replace("joins = [4, 1]", 'joins = [4, 1]\nmass2 = "s"\ncut = true')
    family = read_family(text + "[legs]\np1 = 2\np2 = 3\np3 = 4\n", "g.toml", "g")
    assert family.graph is not None
    assert family.graph.rest == 1
    assert [line.text for line in family.lines] == ["k", "k+p1", "k+p1+p2", "k+p1+p2+p3"]
    assert family.lines[3].cut
    assert family.lines[3].mass2 == family.kinematic_ring.variable("s")
    plain = shipped("massless-box")
    assert [line.momentum for line in family.lines] == [line.momentum for line in plain.lines]


def test_numerators_beside_a_graph() -> None:
    text = (FOLDER / "crossed-vertex.toml").read_text()
    family = read_family(text + '[[line]]\nmomentum = "k1+2*k2-p2"\nnumerator = true\n', "c.toml", "c")
    assert family.lines[6].text == "k1+2*k2-p2"
    assert len(family.lines) == 7


rows = st.lists(st.lists(st.integers(-3, 3).map(Fraction), min_size=4, max_size=4), min_size=1, max_size=6)


@settings(max_examples=60, deadline=None)
@given(rows)
def test_row_space_gives_true_relations(matrix: list[list[Fraction]]) -> None:
    space, kept = RowSpace(), []
    for row in matrix:
        relation = space.add(row)
        if relation is None:
            kept.append(row)
        else:
            combined = [sum((c * kept[i][j] for i, c in relation.items()), Fraction(0)) for j in range(4)]
            assert combined == row
    assert space.size == len(kept) <= 4
