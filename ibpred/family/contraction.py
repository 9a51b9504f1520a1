"""Graphs of subsectors: the lines that are missing are contracted to points."""

from __future__ import annotations

import networkx as nx

from ibpred.errors import InputError
from ibpred.family.definition import FamilyDefinition, Graph


def sector_graph(family: FamilyDefinition, sector: int) -> Graph:
    """The graph of a sector.

    Parameters
    ----------
    sector
        A bit mask of propagators.

    Returns
    -------
    Graph
        With the sector's lines as edges, in line order. Vertices that became one keep the smallest of their
        numbers.

    Raises
    ------
    InputError
        If the family comes from no graph, the sector holds a line that is no propagator, or the missing lines
        close a loop (then all integrals of the sector vanish).
    """
    graph = family.graph
    if graph is None:
        raise InputError(
            f"{family.name} has no graph: its lines are not all squares of momenta that some graph conserves"
        )
    if sector < 0 or sector & ~sum(1 << i for i in family.propagators):
        raise InputError(f"sector {sector} of {family.name} holds lines that are no propagators")
    kept = [bool(sector >> i & 1) for i in family.propagators]
    merged: nx.Graph[int] = nx.Graph()
    merged.add_nodes_from(vertex for edge in graph.edges for vertex in edge)
    for (a, b), stays in zip(graph.edges, kept, strict=True):
        if stays:
            continue
        if nx.has_path(merged, a, b):
            raise InputError(
                f"the lines that sector {sector} of {family.name} lacks close a loop; its integrals vanish"
            )
        merged.add_edge(a, b)
    name = {v: min(part) for part in nx.connected_components(merged) for v in part}
    return Graph(
        tuple((name[a], name[b]) for (a, b), stays in zip(graph.edges, kept, strict=True) if stays),
        tuple((leg, name[vertex]) for leg, vertex in graph.legs),
        None if graph.rest is None else name[graph.rest],
    )
