"""Momenta of the edges of a graph: one loop momentum for each edge outside a spanning tree."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

import networkx as nx

from ibpred.family.definition import Graph


class GraphError(Exception):
    """A graph that is no family: what is wrong, and the edge or leg where it shows."""

    def __init__(self, problem: str, *, edge: int | None = None, leg: str | None = None) -> None:
        super().__init__(problem)
        self.problem = problem
        self.edge = edge
        self.leg = leg


@dataclass(frozen=True)
class Routing:
    """A routed graph.

    Attributes
    ----------
    graph
        Edges, independent legs, vertex of the dependent leg.
    momenta
        For each edge the coefficients over loop and external momenta; the first loop momentum in it
        has a positive coefficient.
    """

    graph: Graph
    momenta: tuple[tuple[Fraction, ...], ...]


def loop_count(edges: Sequence[tuple[int, int]]) -> int:
    """Number of loops of a graph.

    Raises
    ------
    GraphError
        If it is not connected.
    """
    graph = _multigraph(edges)
    if not nx.is_connected(graph):
        parts = sorted(sorted(part) for part in nx.connected_components(graph))
        outside = next(i for i, edge in enumerate(edges) if edge[0] not in parts[0])
        listed = " and ".join(str(part) for part in parts)
        raise GraphError(f"the graph falls into pieces with the vertices {listed}", edge=outside)
    return len(edges) - graph.number_of_nodes() + 1


def attach(edges: Sequence[tuple[int, int]], legs: Mapping[str, int], external: Sequence[str]) -> Graph:
    """Attach the legs to a connected graph.

    Parameters
    ----------
    legs
        Vertex of each leg: all independent external momenta, and the dependent leg under a name of
        its own. The latter may be left out where one vertex alone has fewer than three ends without it.
    external
        The independent external momenta.

    Raises
    ------
    GraphError
        If momentum conservation has no single reading, a leg hangs on a vertex that is not there, or an
        edge dangles.
    """
    ends: dict[int, int] = {}
    for a, b in edges:
        ends[a] = ends.get(a, 0) + 1
        ends[b] = ends.get(b, 0) + 1
    for name, vertex in legs.items():
        if vertex not in ends:
            raise GraphError(f"leg {name} enters at vertex {vertex}, where no edge ends", leg=name)
    missing = [name for name in external if name not in legs]
    if missing:
        raise GraphError(
            f"momentum conservation: no vertex is given for {', '.join(missing)}; add it to [legs]"
        )
    extra = [name for name in legs if name not in external]
    if len(extra) > 1 or (extra and not external):
        raise GraphError(
            f"momentum conservation: one leg depends on the others, but {', '.join(extra)} are not in "
            "external; list the independent momenta there",
            leg=extra[-1],
        )
    rest = legs[extra[0]] if extra else None
    for name in external:
        ends[legs[name]] += 1
    if rest is None and external:
        thin = [vertex for vertex, count in sorted(ends.items()) if count < 3]
        if len(thin) != 1:
            sum_ = "+".join(external)
            raise GraphError(
                f"momentum conservation: the leg that takes {sum_} out of the graph is missing; add its "
                "vertex to [legs] under a new name"
            )
        rest = thin[0]
    if rest is not None:
        ends[rest] += 1
    for number, edge in enumerate(edges):
        for vertex in edge:
            if ends[vertex] == 1:
                raise GraphError(f"the edge dangles: nothing else ends at vertex {vertex}", edge=number)
    return Graph(tuple(edges), tuple((name, legs[name]) for name in external), rest)


def route(graph: Graph) -> Routing:
    """Route the momenta: the first edges that close loops carry a loop momentum alone.

    Raises
    ------
    GraphError
        If an edge carries no loop momentum.
    """
    edges = graph.edges
    tree: nx.Graph[int] = nx.Graph()
    tree.add_nodes_from(vertex for edge in edges for vertex in edge)
    in_tree: dict[int, int] = {}  # edge number -> 1
    for number in reversed(range(len(edges))):
        a, b = edges[number]
        if not nx.has_path(tree, a, b):
            tree.add_edge(a, b, number=number)
            in_tree[number] = 1
    chords = [number for number in range(len(edges)) if number not in in_tree]
    loops, size = len(chords), len(chords) + len(graph.legs)

    def unit(i: int) -> list[Fraction]:
        return [Fraction(int(i == j)) for j in range(size)]

    source = {vertex: [Fraction(0)] * size for vertex in tree}
    momenta: list[list[Fraction]] = [[Fraction(0)] * size for _ in edges]

    def inject(vertex: int, momentum: Sequence[Fraction], sign: int) -> None:
        source[vertex] = [a + sign * b for a, b in zip(source[vertex], momentum, strict=True)]

    for i, number in enumerate(chords):
        momenta[number] = unit(i)
        inject(edges[number][0], unit(i), -1)
        inject(edges[number][1], unit(i), 1)
    for e, (_, vertex) in enumerate(graph.legs):
        inject(vertex, unit(loops + e), 1)
        if graph.rest is not None:
            inject(graph.rest, unit(loops + e), -1)
    root = edges[0][0]
    order = [root, *(child for _, child in nx.bfs_edges(tree, root))]
    parents = {child: parent for parent, child in nx.bfs_edges(tree, root)}
    for child in reversed(order[1:]):  # what enters a subtree leaves it through its one tree edge
        number = tree.edges[child, parents[child]]["number"]
        momenta[number] = source[child]
        inject(parents[child], source[child], 1)
    for number, momentum in enumerate(momenta):
        head = next((c for c in momentum[:loops] if c), None)
        if head is None:
            raise GraphError("the edge carries no loop momentum; leave it out of the family", edge=number)
        momenta[number] = [c * (1 if head > 0 else -1) for c in momentum]
    return Routing(graph, tuple(tuple(momentum) for momentum in momenta))


def _multigraph(edges: Sequence[tuple[int, int]]) -> nx.MultiGraph[int]:
    graph: nx.MultiGraph[int] = nx.MultiGraph()
    graph.add_edges_from(edges)
    return graph
