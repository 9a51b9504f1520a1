"""Graphs found from momenta: random graphs, routed, their momenta scrambled, and found again."""

from dataclasses import replace
from fractions import Fraction
from pathlib import Path

import networkx as nx
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from ibpred.errors import InputError
from ibpred.family.contraction import sector_graph
from ibpred.family.definition import FamilyDefinition, Graph
from ibpred.family.forests import agrees_with_graph
from ibpred.family.momenta import momentum_text
from ibpred.family.polynomials import symanzik
from ibpred.family.reading import read_family
from ibpred.family.recognition import recognise

FAMILIES = sorted((Path(__file__).parents[2] / "families").glob("*.toml"))
LINEAR = {
    "eikonal-vertex",
    "heavy-quark-self-energy",
    "heavy-quark-self-energy-crossed",
    "heavy-quark-self-energy-two-loop",
    "post-minkowskian-box",
    "post-minkowskian-two-loop",
    "static-quark-cusp",
    "static-quark-cusp-two-loop",
}
KINEMATICS = """
[kinematics]
invariants = { s = 2, t = 2, m2 = 2, q = 2 }
equations = ["p1^2 = 0", "p2^2 = m2", "p3^2 = 0", "(p1+p2)^2 = s", "(p2+p3)^2 = t", "(p1+p2+p3)^2 = q"]
"""


def load(path: Path) -> FamilyDefinition:
    return read_family(path.read_text(), path.name, path.stem)


@pytest.mark.parametrize("path", FAMILIES, ids=lambda path: path.stem)
def test_shipped_families_have_a_graph_unless_lines_are_linear(path: Path) -> None:
    family = load(path)
    assert (family.graph is None) == (path.stem in LINEAR)
    found = recognise([family.lines[i] for i in family.propagators], len(family.loops), family.external)
    if family.graph is not None:
        assert found is not None
        assert agrees_with_graph(replace(family, graph=found))


def cubic_and_other_graphs(draw: st.DrawFn) -> list[tuple[int, int]]:
    vertices = draw(st.integers(1, 5))
    edges = [(draw(st.integers(1, v - 1)), v) for v in range(2, vertices + 1)]  # a tree
    for _ in range(draw(st.integers(1, 3))):
        edges.append((draw(st.integers(1, vertices)), draw(st.integers(1, vertices))))
    return edges


@settings(max_examples=60, deadline=None)
@given(st.data())
def test_scrambled_momenta_give_back_u_and_f(data: st.DataObject) -> None:
    """Loop momenta are mixed by a unimodular matrix and shifted by external momenta, lines change sign."""
    edges = data.draw(st.permutations(data.draw(st.composite(cubic_and_other_graphs)())))
    vertices = sorted({v for edge in edges for v in edge})
    legs = [data.draw(st.sampled_from(vertices)) for _ in range(4)]
    text = KINEMATICS + "[legs]\n" + "\n".join(f"p{i + 1} = {v}" for i, v in enumerate(legs))
    text += "".join(f"\n[[edge]]\njoins = [{a}, {b}]\n" for a, b in edges)
    try:
        family = read_family(text, "g.toml", "g")
    except InputError:  # a dangling edge, a bridge, equal momenta
        assume(False)
    loops, names = len(family.loops), (*family.loops, *family.external)
    change = [[Fraction(int(i == j)) for j in range(loops + 3)] for i in range(loops)]
    for _ in range(3):
        i, j = data.draw(st.integers(0, loops - 1)), data.draw(st.integers(0, loops + 2))
        sign = data.draw(st.sampled_from([1, -1]))
        if i != j:
            source = change[j] if j < loops else [Fraction(int(k == j)) for k in range(loops + 3)]
            change[i] = [a + sign * b for a, b in zip(change[i], source, strict=True)]
    text = f'[momenta]\nloop = {list(family.loops)}\nexternal = ["p1", "p2", "p3"]\n' + KINEMATICS
    for i in family.propagators:
        q = family.lines[i].momentum
        assert q is not None
        new = [
            sum((q[k] * change[k][j] for k in range(loops)), start=Fraction(0)) + (q[j] if j >= loops else 0)
            for j in range(loops + 3)
        ]
        sign = data.draw(st.sampled_from([1, -1]))
        text += f'[[line]]\nmomentum = "{momentum_text(names, [sign * c for c in new])}"\n'
    scrambled = read_family(text, "g.toml", "g")
    assert scrambled.graph is not None
    assert agrees_with_graph(scrambled)
    for a, b in zip(symanzik(family), symanzik(scrambled), strict=True):
        keep = len(family.propagators)
        assert {e[:keep]: c for e, c in a.terms.items()} == {e[:keep]: c for e, c in b.terms.items()}


def test_the_recognised_double_box_is_the_drawn_one() -> None:
    """Planar double box: its dual is simple, so that the graph is unique up to names of vertices."""
    found = load(Path(FAMILIES[0]).parent / "planar-double-box.toml").graph
    given_ = load(Path(FAMILIES[0]).parent / "planar-double-box-one-leg.toml").graph
    assert found is not None
    assert given_ is not None

    def labelled(graph: Graph) -> nx.Graph:
        result = nx.Graph()
        for number, (a, b) in enumerate(graph.edges):
            result.add_edge(a, ("edge", number), what="")
            result.add_edge(b, ("edge", number), what="")
        for name, vertex in (*graph.legs, ("rest", graph.rest)):
            result.add_edge(vertex, ("leg", name), what=name)
        return result

    assert nx.is_isomorphic(labelled(found), labelled(given_), edge_match=lambda a, b: a == b)


def test_momenta_that_no_graph_conserves() -> None:
    text = '[momenta]\nloop = ["k"]\nexternal = ["p1", "p2", "p3"]\n' + KINEMATICS
    for q in ("k", "k+p1", "k+p2", "k+p1+p2+2*p3"):
        text += f'[[line]]\nmomentum = "{q}"\n'
    assert read_family(text, "x.toml", "x").graph is None


def test_sector_graphs() -> None:
    family = load(Path(FAMILIES[0]).parent / "planar-double-box.toml")
    for sector in (0b1111111, 0b0101010, 0b1011010, 0b0111001):
        graph = sector_graph(family, sector)
        kept = tuple(line for i, line in enumerate(family.lines) if sector >> i & 1)
        small = replace(family, lines=kept, graph=graph)
        assert agrees_with_graph(small)  # U and F of contracted graph = U and F with x_i = 0
    with pytest.raises(InputError, match="close a loop"):
        sector_graph(family, 0b1110000)
    with pytest.raises(InputError, match="no propagators"):
        sector_graph(family, 1 << 8)
    with pytest.raises(InputError, match="no graph"):
        sector_graph(load(Path(FAMILIES[0]).parent / "static-quark-cusp.toml"), 1)
