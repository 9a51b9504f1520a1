"""Where the vertices of a Feynman graph go on paper."""

from __future__ import annotations

from cmath import phase, rect
from collections.abc import Iterator, Mapping
from itertools import combinations
from math import hypot, pi
from typing import Any

import networkx as nx

from ibpred.family.definition import Graph

Node = tuple[str, int]
"""``("vertex", name)``, ``("leg", number)`` (outer end of a leg; the dependent one last) or
``("loop", edge)`` (a point that keeps room for a self-loop)."""

Point = tuple[float, float]

_LEG = 0.75  # lengths relative to an edge between two vertices
_SELF_LOOP = 0.8


def legs_of(graph: Graph) -> tuple[int, ...]:
    """Vertex of each leg, the dependent one last."""
    own = tuple(vertex for _, vertex in graph.legs)
    return own if graph.rest is None else (*own, graph.rest)


def layout(graph: Graph) -> dict[Node, Point]:
    """Places of the vertices, the ends of the legs and the self-loops; an edge has about the length one.

    Several starting arrangements are relaxed so that distances on paper follow those in the graph (T. Kamada,
    S. Kawai, Inf. Process. Lett. 31 (1989) 7); the one with the fewest crossings and with the legs outside is
    kept. The first leg comes from the left.
    """
    skeleton: nx.Graph[Node] = nx.Graph()
    skeleton.add_nodes_from(("vertex", v) for edge in graph.edges for v in edge)
    for number, (a, b) in enumerate(graph.edges):
        if a == b:
            skeleton.add_edge(("vertex", a), ("loop", number), weight=_SELF_LOOP)
        else:
            skeleton.add_edge(("vertex", a), ("vertex", b), weight=1.0)
    for number, vertex in enumerate(legs_of(graph)):
        skeleton.add_edge(("vertex", vertex), ("leg", number), weight=_LEG)
    if len(skeleton) == 1:
        return dict.fromkeys(skeleton, (0.0, 0.0))
    best: dict[Node, Point] = {}
    fewest: int | None = None
    for start in _starts(skeleton):
        places = _relaxed(skeleton, start)
        faults = _faults(skeleton, places)
        if fewest is None or faults < fewest:
            best, fewest = places, faults
        if not faults:
            break
    return _oriented(graph, best)


def _starts(skeleton: nx.Graph[Node]) -> Iterator[dict[Node, Point]]:
    """Starting arrangements: planar with the legs outside if there is one, planar, on a circle."""
    # numbers for nodes: sets of names would be walked in an order that differs from run to run
    number = {node: i for i, node in enumerate(skeleton)}
    inner: nx.Graph[int] = nx.Graph()
    inner.add_nodes_from(number.values())
    inner.add_edges_from((number[a], number[b]) for a, b in skeleton.edges)
    closed = inner.copy()
    closed.add_edges_from((len(number), i) for node, i in number.items() if node[0] == "leg")
    for candidate in (closed, inner):
        if nx.is_planar(candidate):
            planar: Any = nx.planar_layout(candidate)
            yield {node: (float(planar[i][0]), float(planar[i][1])) for node, i in number.items()}
    places: Any = nx.circular_layout(skeleton)
    yield {node: (float(places[node][0]), float(places[node][1])) for node in skeleton}


def _relaxed(skeleton: nx.Graph[Node], start: Mapping[Node, Point]) -> dict[Node, Point]:
    places = nx.kamada_kawai_layout(skeleton, pos=start)
    lengths = [
        hypot(*(places[a] - places[b])) / weight
        for a, b, weight in skeleton.edges(data="weight", default=1.0)
    ]
    unit = sum(lengths) / len(lengths)
    return {node: (float(places[node][0] / unit), float(places[node][1] / unit)) for node in skeleton}


def _faults(skeleton: nx.Graph[Node], places: Mapping[Node, Point]) -> int:
    """Number of crossings of edges, and of legs, drawn on to infinity, with edges."""

    def meet(p: Point, q: Point, r: Point, s: Point) -> bool:
        return _left(p, q, r) != _left(p, q, s) and _left(r, s, p) != _left(r, s, q)

    count = 0
    for first, second in combinations(skeleton.edges, 2):
        if not {*first} & {*second}:
            count += meet(*(places[node] for node in (*first, *second)))
    for vertex, leg in skeleton.edges:
        if leg[0] != "leg":
            continue
        (x, y), (u, v) = places[vertex], places[leg]
        far = (u + 100 * (u - x), v + 100 * (v - y))
        count += sum(meet((u, v), far, places[a], places[b]) for a, b in skeleton.edges if b != leg)
    return count


def _left(a: Point, b: Point, c: Point) -> bool:
    """Whether c lies on the left of the line from a to b."""
    return (b[0] - a[0]) * (c[1] - a[1]) > (b[1] - a[1]) * (c[0] - a[0])


def _oriented(graph: Graph, places: Mapping[Node, Point]) -> dict[Node, Point]:
    """Centred, the first leg on the left, the second one not below it (y grows downwards).

    With four legs or more the edges are turned towards the axes as far as they agree on a direction.
    """
    size, legs = len(places), len(legs_of(graph))
    centre = sum(complex(*place) for place in places.values()) / size
    moved = {node: complex(*place) - centre for node, place in places.items()}
    if legs > 1 and (moved["leg", 0].conjugate() * moved["leg", 1]).imag < 0:
        moved = {node: z.conjugate() for node, z in moved.items()}
    if not legs:
        return {node: (z.real, z.imag) for node, z in moved.items()}
    angle = (pi if legs < 4 else 5 * pi / 4) - phase(moved["leg", 0])
    if legs >= 4:
        ends = [(moved["vertex", a], moved["vertex", b]) for a, b in graph.edges if a != b]
        common = sum(rect(1, 4 * phase(z - w)) for z, w in ends)
        if abs(common) > 0.1 * len(ends):
            exact = -phase(common) / 4  # up to quarter turns
            angle = exact + pi / 2 * round((angle - exact) / (pi / 2))
    turned = {node: z * rect(1, angle) for node, z in moved.items()}
    return {node: (z.real, z.imag) for node, z in turned.items()}
