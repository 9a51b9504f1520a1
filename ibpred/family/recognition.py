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

import flint
import networkx as nx
import numpy as np

from ibpred.family.definition import Graph, Line

_MOST_VERTICES = 11  # the vectors that may be vertices are all looked at: 3^10 of them

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
        line is given by an expression, or no connected graph carries these momenta. Graphs of more than
        eleven vertices are not sought.
    """
    momenta = [line.momentum for line in lines]
    if any(q is None for q in momenta):
        return None
    routed = [q for q in momenta if q is not None]
    count = len(routed) - loops + 1
    if not 1 <= count <= _MOST_VERTICES:
        return None
    kernel = _kernel([q[:loops] for q in routed])
    if len(kernel) != count - 1:
        return None
    if any(abs(c) > 1 or c.denominator != 1 for y in kernel for c in y):
        return None  # the cut space of a graph is unimodular
    vertices = sorted(_vertices(kernel, [q[loops:] for q in routed], len(external)), key=_size)
    moving = {e for vertex in kernel for e, c in enumerate(vertex) if c}
    wanted = {(s, e) for e in moving for s in "+-"}
    if external:
        wanted |= {("leg", g) for g in range(len(external) + 1)}
    for chosen in _covers(frozenset(wanted), vertices, count if wanted else 0):
        graph = _assembled(chosen, len(routed), external)
        if graph is not None:
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
    basis = np.array([[int(c) for c in y] for y in kernel], dtype=np.int16).reshape(len(kernel), len(outer))
    weights = np.stack(np.unravel_index(np.arange(3 ** len(kernel)), (3,) * len(kernel))) if kernel else None
    cuts = np.zeros((1, len(outer)), np.int16)
    if weights is not None:
        cuts = (weights.T.astype(np.int16) - 1) @ basis
        cuts = cuts[(np.abs(cuts).max(axis=1) == 1)]
    for y in cuts.tolist():
        ends = tuple((e, c) for e, c in enumerate(y) if c)
        inflow = [sum((c * outer[e][g] for e, c in ends), start=Fraction(0)) for g in range(external)]
        if all(c in (0, 1) for c in inflow):
            yield _Vertex(ends, tuple(g for g in range(external) if inflow[g]))
        if external and all(c in (0, -1) for c in inflow):  # the dependent leg enters here
            yield _Vertex(ends, (*(g for g in range(external) if not inflow[g]), external))


def _size(vertex: _Vertex) -> int:
    return len(vertex.ends) + len(vertex.legs)


def _covers(
    wanted: frozenset[Item], vertices: Sequence[_Vertex], count: int
) -> Iterator[tuple[_Vertex, ...]]:
    """Sets of so many vertices that use each wanted item once, at the item with the fewest choices first.

    Parameters
    ----------
    vertices
        Smallest first.
    """
    if not wanted or not count:
        if not wanted and not count:
            yield ()
        return
    fitting = [(vertex, items) for vertex in vertices if (items := vertex.items()) <= wanted]
    if not fitting:
        return
    most = len(wanted) - (count - 1) * _size(fitting[0][0])  # what the smallest ones leave to a single one
    fitting = [(vertex, items) for vertex, items in fitting if len(items) <= most]
    choices: dict[Item, list[tuple[_Vertex, frozenset[Item]]]] = {item: [] for item in sorted(wanted)}
    for vertex, items in fitting:
        for item in items:
            choices[item].append((vertex, items))
    rest = [vertex for vertex, _ in fitting]
    for vertex, items in min(choices.values(), key=len):
        for others in _covers(wanted - items, rest, count - 1):
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
