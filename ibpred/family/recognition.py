"""The graph behind lines that are given by their momenta.

A graph's vertices are where momentum is conserved. With the momenta q_e of the lines oriented as written,
a vertex is a vector y with entries -1, 0, 1 such that ``sum_e y_e q_e`` holds no loop momentum and equals
the sum of the legs that enter there: y lies in the kernel of the loop part of the momenta (the cut space of
the graph; H. Whitney, Amer. J. Math. 55 (1933) 245 for how far it fixes the graph). The vertices of a graph
together use every line once in each direction and every leg once, which is an exact cover.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import product

import flint
import networkx as nx

from ibpred.family.definition import Graph, Line

_MOST_CUTS = 3**12  # vectors of the cut space that are looked at; about thirteen vertices

Item = tuple[str, int]
"""What a cover uses once: a line backwards or forwards (``"-"``, ``"+"``), or a leg (``"leg"``)."""


@dataclass(frozen=True)
class _Vertex:
    """A possible vertex: the ends of lines at it and its legs, where the dependent leg is the last number."""

    ends: tuple[tuple[int, int], ...]
    legs: tuple[int, ...]

    def items(self) -> frozenset[Item]:
        return frozenset([("+" if s > 0 else "-", e) for e, s in self.ends] + [("leg", g) for g in self.legs])


def recognise(lines: Sequence[Line], loops: int, external: Sequence[str]) -> Graph | None:
    """The graph that the lines come from.

    Parameters
    ----------
    lines
        The propagators of a family, in line order.
    loops
        Number of loop momenta.
    external
        Names of the independent external momenta.

    Returns
    -------
    Graph or None
        Momentum is conserved at each of its vertices, numbered from 1 in the order in which the edges reach
        them. Where several graphs do (they have equal U and F), the first one found. None if there is none: a
        line is given by an expression, or no connected graph carries these momenta.
    """
    momenta = [line.momentum for line in lines]
    if any(q is None for q in momenta):
        return None
    routed = [q for q in momenta if q is not None]
    count = len(routed) - loops + 1
    if count < 1 or 3 ** (count - 1) > _MOST_CUTS:
        return None
    kernel = _kernel([q[:loops] for q in routed])
    if len(kernel) != count - 1:
        return None
    vertices = list(_vertices(kernel, [q[loops:] for q in routed], len(external)))
    moving = {e for vertex in kernel for e, c in enumerate(vertex) if c}
    wanted = {(s, e) for e in moving for s in "+-"}
    if external:
        wanted |= {("leg", g) for g in range(len(external) + 1)}
    for chosen in _covers(frozenset(wanted), vertices):
        graph = _assembled(chosen, len(routed), external)
        if graph is not None and len({v for edge in graph.edges for v in edge}) == count:
            return graph
    return None


def _kernel(loop_parts: Sequence[Sequence[Fraction]]) -> list[tuple[Fraction, ...]]:
    """Basis of the y with ``sum_e y_e q_e`` free of loop momenta, each with one pivot of its own."""
    lines, loops = len(loop_parts), len(loop_parts[0])
    matrix = flint.fmpq_mat(
        [[flint.fmpq(q[i].numerator, q[i].denominator) for q in loop_parts] for i in range(loops)]
    )
    reduced, rank = matrix.rref()
    pivots = [next(e for e in range(lines) if reduced[i, e] != 0) for i in range(rank)]
    basis = []
    for free in (e for e in range(lines) if e not in pivots):
        y = [Fraction(0)] * lines
        y[free] = Fraction(1)
        for i, pivot in enumerate(pivots):
            entry = -reduced[i, free]
            y[pivot] = Fraction(int(entry.p), int(entry.q))
        basis.append(tuple(y))
    return basis


def _vertices(
    kernel: Sequence[Sequence[Fraction]], outer: Sequence[Sequence[Fraction]], external: int
) -> Iterator[_Vertex]:
    """All possible vertices; zero is one where the graph may have a single vertex."""
    lines = range(len(outer))
    for weights in product((0, 1, -1), repeat=len(kernel)):
        y = [sum((w * b[e] for w, b in zip(weights, kernel, strict=True)), start=Fraction(0)) for e in lines]
        if any(abs(c) > 1 or c.denominator != 1 for c in y) or (kernel and not any(y)):
            continue
        ends = tuple((e, int(c)) for e, c in enumerate(y) if c)
        inflow = [sum((y[e] * outer[e][g] for e in lines), start=Fraction(0)) for g in range(external)]
        if all(c in (0, 1) for c in inflow):
            yield _Vertex(ends, tuple(g for g in range(external) if inflow[g]))
        if external and all(c in (0, -1) for c in inflow):  # the dependent leg enters here
            yield _Vertex(ends, (*(g for g in range(external) if not inflow[g]), external))


def _covers(wanted: frozenset[Item], vertices: Sequence[_Vertex]) -> Iterator[tuple[_Vertex, ...]]:
    """Sets of vertices that use each wanted item once, at the item with the fewest choices first."""
    if not wanted:
        yield ()
        return
    fitting = [(vertex, items) for vertex in vertices if (items := vertex.items()) <= wanted]
    choices: dict[Item, list[tuple[_Vertex, frozenset[Item]]]] = {item: [] for item in sorted(wanted)}
    for vertex, items in fitting:
        for item in items:
            choices[item].append((vertex, items))
    rest = [vertex for vertex, _ in fitting]
    for vertex, items in min(choices.values(), key=len):
        for others in _covers(wanted - items, rest):
            yield (vertex, *others)


def _assembled(chosen: Sequence[_Vertex], lines: int, external: Sequence[str]) -> Graph | None:
    """The graph with the chosen vertices, if it is connected; lines that end nowhere are self-loops."""
    tail: dict[int, int] = {}
    head: dict[int, int] = {}
    at: dict[int, int] = {}
    for number, vertex in enumerate(chosen):
        for e, sign in vertex.ends:
            (tail if sign > 0 else head)[e] = number
        at |= dict.fromkeys(vertex.legs, number)
    pieces: nx.Graph[int] = nx.Graph()
    pieces.add_nodes_from(range(max(len(chosen), 1)))
    pieces.add_edges_from((tail[e], head[e]) for e in tail)
    if not nx.is_connected(pieces):
        return None
    # a self-loop may hang anywhere; the vertex of the first line without a direction of its own will do
    joins = [(tail.get(e, 0), head.get(e, 0)) for e in range(lines)]
    order = {v: i + 1 for i, v in enumerate(dict.fromkeys(v for edge in joins for v in edge))}
    legs = tuple((name, order[at[g]]) for g, name in enumerate(external))
    rest = order[at[len(external)]] if external else None
    return Graph(tuple((order[a], order[b]) for a, b in joins), legs, rest)
