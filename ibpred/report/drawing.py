"""Pictures of the graphs of a family and of its sectors, as SVG text.

Massive lines are thick, cut lines are dashed, lines carry their numbers in the family, legs their momenta
(all incoming).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from html import escape
from math import hypot

from ibpred.family.contraction import sector_graph
from ibpred.family.definition import FamilyDefinition, Graph
from ibpred.report.layout import Point, layout, legs_of
from ibpred.sectors.order import lines_of

_EDGE = 72.0  # length of an edge, in pixels
_MARGIN = 22.0
_CAPTION = 22.0
_GAP = 18.0


@dataclass(frozen=True)
class EdgeStyle:
    """How an edge is drawn.

    Attributes
    ----------
    label
        Beside the line.
    tip
        What a browser shows when the pointer rests on the line.
    massive, cut
        Thick, dashed.
    """

    label: str
    tip: str = ""
    massive: bool = False
    cut: bool = False


@dataclass(frozen=True)
class _Panel:
    """SVG elements with the corner (0, 0) and their size."""

    elements: tuple[str, ...]
    width: float
    height: float


def graph_svg(graph: Graph, styles: Sequence[EdgeStyle], caption: str) -> str:
    """A graph as an SVG document.

    Parameters
    ----------
    styles
        One for each edge.
    caption
        Below the picture.
    """
    return _document([_panel(graph, styles, caption)], 1, caption)


def family_svg(family: FamilyDefinition) -> str:
    """The graph of a family.

    Raises
    ------
    InputError
        If the family comes from no graph.
    """
    return sector_svg(family, _top(family), family.title)


def sector_svg(family: FamilyDefinition, sector: int, caption: str) -> str:
    """The graph of a sector: the family's with the other lines contracted.

    Raises
    ------
    InputError
        If the family comes from no graph, or the sector is none of its nonzero ones.
    """
    return _document([_sector_panel(family, sector, caption)], 1, caption)


def sheet_svg(family: FamilyDefinition, sectors: Sequence[int], columns: int) -> str:
    """The graph of a family and those of some sectors, each with its powers below, in one SVG document.

    Raises
    ------
    InputError
        As `sector_svg`.
    """
    panels = [_sector_panel(family, _top(family), family.title)]
    for sector in sectors:
        powers = ",".join(str(sector >> i & 1) for i in range(len(family.lines)))
        panels.append(_sector_panel(family, sector, f"({powers})"))
    return _document(panels, columns, family.title)


def _top(family: FamilyDefinition) -> int:
    return sum(1 << i for i in family.propagators)


def _sector_panel(family: FamilyDefinition, sector: int, caption: str) -> _Panel:
    several = len({line.mass2 for line in family.lines if line.mass2}) > 1
    styles = []
    for i in lines_of(sector):
        line = family.lines[i]
        massive = bool(line.mass2)
        mass = f", squared mass {line.mass2}" if massive else ""
        label = f"{i + 1} ({line.mass2})" if massive and several else str(i + 1)
        styles.append(EdgeStyle(label, f"line {i + 1}: momentum {line.text}{mass}", massive, line.cut))
    return _panel(sector_graph(family, sector), styles, caption)


def _panel(graph: Graph, styles: Sequence[EdgeStyle], caption: str) -> _Panel:
    places = {node: (x * _EDGE, y * _EDGE) for node, (x, y) in layout(graph).items()}
    lines: list[str] = []
    labels: list[str] = []
    corners: list[Point] = list(places.values())
    parallel: dict[frozenset[int], list[int]] = {}
    for number, edge in enumerate(graph.edges):
        parallel.setdefault(frozenset(edge), []).append(number)
    for number, ((a, b), style) in enumerate(zip(graph.edges, styles, strict=True)):
        at = places["vertex", a]
        if a == b:
            path, middle = _self_loop(at, places.get(("loop", number), (at[0], at[1] - _EDGE)))
        else:
            siblings = parallel[frozenset((a, b))]
            low, high = places["vertex", min(a, b)], places["vertex", max(a, b)]
            path, middle = _bow(low, high, siblings.index(number), len(siblings))
        width = "3.4" if style.massive else "1.4"
        dash = ' stroke-dasharray="5 4"' if style.cut else ""
        tip = f"<title>{escape(style.tip)}</title>" if style.tip else ""
        lines.append(f'<path d="{path}" fill="none" stroke="#222" stroke-width="{width}"{dash}>{tip}</path>')
        labels.append(_text(middle, style.label, "#06c"))
        corners.append(middle)
    names = [name for name, _ in graph.legs]
    if graph.rest is not None:
        names.append("".join(f"-{name}" for name in names))
    for number, (vertex, name) in enumerate(zip(legs_of(graph), names, strict=True)):
        at, end = places["vertex", vertex], places["leg", number]
        lines.append(
            f'<path d="M {_pair(at)} L {_pair(end)}" fill="none" stroke="#888" stroke-width="1.4"></path>'
        )
        reach = hypot(end[0] - at[0], end[1] - at[1]) or 1.0
        outer = (end[0] + 10 * (end[0] - at[0]) / reach, end[1] + 10 * (end[1] - at[1]) / reach)
        labels.append(_text(outer, name, "#444"))
        half = 3.2 * len(name)
        corners += [(outer[0] - half, outer[1]), (outer[0] + half, outer[1])]
    dots = [
        f'<circle cx="{places[node][0]:z.1f}" cy="{places[node][1]:z.1f}" r="2.6" fill="#222"></circle>'
        for node in places
        if node[0] == "vertex"
    ]
    left, top = min(x for x, _ in corners) - _MARGIN, min(y for _, y in corners) - _MARGIN
    width_ = max(max(x for x, _ in corners) + _MARGIN - left, 6.6 * len(caption))
    height = max(y for _, y in corners) + _MARGIN - top
    shift = (width_ - (max(x for x, _ in corners) + _MARGIN - left)) / 2
    return _Panel(
        (
            f'<g transform="translate({shift - left:z.1f} {-top:z.1f})">',
            *lines,
            *dots,
            *labels,
            "</g>",
            _text((width_ / 2, height + _CAPTION / 2), caption, "#222"),
        ),
        width_,
        height + _CAPTION,
    )


def _bow(low: Point, high: Point, place: int, count: int) -> tuple[str, Point]:
    """A line from one vertex to another, the i-th of several; its path and its middle."""
    dx, dy = high[0] - low[0], high[1] - low[1]
    spread = min(0.36, 1.2 / max(count - 1, 1)) * (place - (count - 1) / 2)
    middle = ((low[0] + high[0]) / 2 - spread * dy, (low[1] + high[1]) / 2 + spread * dx)
    if not spread:
        return f"M {_pair(low)} L {_pair(high)}", middle
    # the middle of a quadratic curve is half way to its control point
    control = (middle[0] - spread * dy, middle[1] + spread * dx)
    return f"M {_pair(low)} Q {_pair(control)} {_pair(high)}", middle


def _self_loop(at: Point, towards: Point) -> tuple[str, Point]:
    """A self-loop at a vertex; its path and its outermost point."""
    dx, dy = towards[0] - at[0], towards[1] - at[1]
    left = (at[0] + 1.1 * dx - 0.75 * dy, at[1] + 1.1 * dy + 0.75 * dx)
    right = (at[0] + 1.1 * dx + 0.75 * dy, at[1] + 1.1 * dy - 0.75 * dx)
    outermost = (at[0] + 0.825 * dx, at[1] + 0.825 * dy)
    return f"M {_pair(at)} C {_pair(left)} {_pair(right)} {_pair(at)}", outermost


def _text(at: Point, text: str, colour: str) -> str:
    return (
        f'<text x="{at[0]:z.1f}" y="{at[1]:z.1f}" fill="{colour}" stroke="#fff" stroke-width="4" '
        f'paint-order="stroke" text-anchor="middle" dominant-baseline="central">{escape(text)}</text>'
    )


def _pair(point: Point) -> str:
    return f"{point[0]:z.1f} {point[1]:z.1f}"


def _document(panels: Sequence[_Panel], columns: int, title: str) -> str:
    """An SVG document with the panels in rows."""
    rows = [panels[i : i + columns] for i in range(0, len(panels), columns)]
    width = max(sum(panel.width + _GAP for panel in row) + _GAP for row in rows)
    body: list[str] = []
    y = _GAP
    for row in rows:
        x = _GAP
        for panel in row:
            body += [f'<g transform="translate({x:z.1f} {y:z.1f})">', *panel.elements, "</g>"]
            x += panel.width + _GAP
        y += max(panel.height for panel in row) + _GAP
    head = (
        f'<svg xmlns="http://www.w3.org/2000/svg" width="{width:.0f}" height="{y:.0f}" '
        f'viewBox="0 0 {width:z.1f} {y:z.1f}" role="img" font-family="sans-serif" font-size="11">'
    )
    return "\n".join(
        [
            head,
            f"<title>{escape(title)}</title>",
            '<rect width="100%" height="100%" fill="#fff"></rect>',
            *body,
            "</svg>\n",
        ]
    )
