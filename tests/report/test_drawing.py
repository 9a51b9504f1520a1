"""Pictures: every line, leg and vertex is drawn, apart from the others, planar graphs without crossings."""

from itertools import combinations
from math import hypot
from pathlib import Path
from xml.etree import ElementTree

import pytest
from click.testing import CliRunner

from ibpred.cli.main import group
from ibpred.errors import InputError
from ibpred.family.definition import FamilyDefinition, Graph
from ibpred.family.reading import read_family
from ibpred.report.drawing import EdgeStyle, family_svg, graph_svg, sector_svg, sheet_svg
from ibpred.report.layout import layout, legs_of

FOLDER = Path(__file__).parents[2] / "families"
PLANAR = ("massless-box", "planar-double-box", "pentabox", "kite", "propagator-benz", "triangle-one-leg")


def load(name: str) -> FamilyDefinition:
    path = FOLDER / f"{name}.toml"
    return read_family(path.read_text(), path.name, name)


def elements(svg: str, tag: str) -> list[ElementTree.Element]:
    return list(ElementTree.fromstring(svg).iter(f"{{http://www.w3.org/2000/svg}}{tag}"))


@pytest.mark.parametrize(
    "name", ["massless-box", "sunrise-distinct-masses", "tadpole", "vacuum-one-mass", "crossed-vertex"]
)
def test_all_parts_are_drawn(name: str) -> None:
    family = load(name)
    assert family.graph is not None
    svg = family_svg(family)
    legs = len(legs_of(family.graph))
    assert len(elements(svg, "path")) == len(family.propagators) + legs
    assert len(elements(svg, "circle")) == len({v for edge in family.graph.edges for v in edge})
    texts = [element.text for element in elements(svg, "text")]
    assert len(texts) == len(family.propagators) + legs + 1
    assert family.title in texts
    assert set(family.external) <= set(texts)
    numbers = [text.split()[0] for text in texts if text and text[0].isdigit()]
    assert numbers == [str(i + 1) for i in family.propagators]
    thick = [path for path in elements(svg, "path") if path.get("stroke-width") == "3.4"]
    assert len(thick) == sum(bool(line.mass2) for line in family.lines)
    assert svg == family_svg(family)


def cross(p, q, r, s) -> bool:
    def side(a, b, c) -> bool:
        return (b[0] - a[0]) * (c[1] - a[1]) > (b[1] - a[1]) * (c[0] - a[0])

    return side(p, q, r) != side(p, q, s) and side(r, s, p) != side(r, s, q)


@pytest.mark.parametrize("name", PLANAR)
def test_planar_graphs_have_no_crossings(name: str) -> None:
    graph = load(name).graph
    assert graph is not None
    places = layout(graph)
    for one, other in combinations(places.values(), 2):
        assert hypot(one[0] - other[0], one[1] - other[1]) > 0.3
    segments = [(("vertex", a), ("vertex", b)) for a, b in graph.edges]
    segments += [(("vertex", v), ("leg", i)) for i, v in enumerate(legs_of(graph))]
    for one, other in combinations(segments, 2):
        if not {*one} & {*other}:
            assert not cross(*(places[node] for node in (*one, *other)))


def test_first_leg_comes_from_the_left() -> None:
    for name in ("kite", "massless-box", "triangle-one-leg", "planar-double-box"):
        graph = load(name).graph
        assert graph is not None
        assert layout(graph)["leg", 0][0] < 0


def test_sector_is_contracted() -> None:
    svg = sector_svg(load("planar-double-box"), 0b0101010, "sunrise in t")
    assert len(elements(svg, "circle")) == 2
    assert len(elements(svg, "path")) == 3 + 4
    assert [e.text for e in elements(svg, "text")][:3] == ["2", "4", "6"]


def test_sheet_has_all_sectors() -> None:
    family = load("kite")
    svg = sheet_svg(family, (0b01110, 0b11011), columns=2)
    assert len(elements(svg, "circle")) == 4 + 2 + 3
    texts = [e.text for e in elements(svg, "text")]
    assert "(0,1,1,1,0)" in texts
    assert "(1,1,0,1,1)" in texts


def test_text_is_escaped_and_cuts_are_dashed() -> None:
    graph = Graph(((1, 2), (1, 2), (2, 2)), (("p", 1),), 2)
    styles = [EdgeStyle("<1>"), EdgeStyle("2", tip="a & b", cut=True), EdgeStyle("3", massive=True)]
    svg = graph_svg(graph, styles, '"x" < y')
    assert elements(svg, "text")[0].text == "<1>"
    assert [e.text for e in elements(svg, "title")] == ['"x" < y', "a & b"]
    assert [p.get("stroke-dasharray") for p in elements(svg, "path")][:3] == [None, "5 4", None]


def test_families_without_a_graph_have_no_picture() -> None:
    with pytest.raises(InputError, match="has no graph"):
        family_svg(load("post-minkowskian-box"))


def test_inspect_draws(tmp_path: Path) -> None:
    picture = tmp_path / "kite.svg"
    arguments = [
        "inspect",
        str(FOLDER / "kite.toml"),
        "--work",
        str(tmp_path / "w"),
        "--picture",
        str(picture),
    ]
    result = CliRunner().invoke(group, arguments, catch_exceptions=False)
    assert result.exit_code == 0
    assert len(elements(picture.read_text(), "circle")) == 4 + 2 + 3 + 3 + 4
