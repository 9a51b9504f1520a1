"""The [[edge]] and [legs] sections of a family file."""

from __future__ import annotations

from collections.abc import Mapping

from ibpred.family.definition import Graph, Line
from ibpred.family.lines import Space, square_line
from ibpred.family.momenta import momentum_text
from ibpred.family.reading_lines import read_mass2
from ibpred.family.routing import GraphError, attach, loop_count, route
from ibpred.family.source import Source


def read_joins(source: Source) -> tuple[tuple[int, int], ...]:
    """The pairs of vertices of the edges.

    Raises
    ------
    FamilyFileError
        Unless each edge joins two integers.
    """
    edges: list[tuple[int, int]] = []
    for i, edge in enumerate(source.data["edge"]):
        pair = edge.get("joins")
        if not (isinstance(pair, list) and len(pair) == 2 and all(type(v) is int for v in pair)):
            raise source.error(
                "an edge joins two vertices, given by integers: joins = [1, 2]",
                ("edge", i, "joins") if "joins" in edge else ("edge", i),
            )
        edges.append((pair[0], pair[1]))
    return tuple(edges)


def read_loop_names(
    source: Source, edges: tuple[tuple[int, int], ...], given: tuple[str, ...] | None
) -> tuple[str, ...]:
    """Names of a graph's loop momenta: as given, or ``k1, k2, ...``.

    Raises
    ------
    FamilyFileError
        If the graph is in pieces, has no loop, or another number of loops than names are given.
    """
    try:
        count = loop_count(edges)
    except GraphError as error:
        raise source.error(error.problem, ("edge", error.edge or 0)) from None
    if count == 0:
        raise source.error("the graph has no loop", ("edge", 0))
    names = tuple(f"k{i + 1}" for i in range(count)) if given is None else given
    if len(names) != count:
        raise source.error(
            f"the graph has {count} loops, but {len(names)} loop momenta are named", ("momenta", "loop")
        )
    return names


def read_edges(source: Source, space: Space, dimensions: Mapping[str, int]) -> tuple[Graph, tuple[Line, ...]]:
    """The graph and the lines of its edges, momenta routed.

    Parameters
    ----------
    dimensions
        Mass dimensions of all momenta and invariants.

    Raises
    ------
    FamilyFileError
        At the first edge or leg that is wrong.
    """
    legs = source.integers(("legs",))
    for name, dimension in zip(space.external, space.dimensions, strict=True):
        if dimension != 1 and name in legs:
            raise source.error(f"{name} is no momentum: its mass dimension is {dimension}", ("legs", name))
    try:
        routing = route(attach(read_joins(source), legs, space.external))
    except GraphError as error:
        if error.edge is not None:
            raise source.error(error.problem, ("edge", error.edge)) from None
        raise source.error(error.problem, ("legs", error.leg) if error.leg else ("legs",)) from None
    names = (*space.loops, *space.external)
    lines = tuple(
        square_line(
            momentum,
            read_mass2(source, ("edge", i, "mass2"), space, dimensions),
            space,
            text=momentum_text(names, momentum),
            cut=source.flag(("edge", i, "cut")),
            numerator=False,
        )
        for i, momentum in enumerate(routing.momenta)
    )
    return routing.graph, lines
