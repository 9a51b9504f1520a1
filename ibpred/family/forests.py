"""U and F of a graph by spanning trees and spanning two-forests.

``U = sum_T prod_{e not in T} x_e``,
``F = sum_{(A,B)} (-P_A^2) prod_{e not in A,B} x_e + U sum_e m_e^2 x_e``

with the trees T, the pairs (A, B) of disjoint trees that together reach all vertices, and the momentum P_A
that enters A from outside (C. Bogner, S. Weinzierl, arXiv:1002.3458). No momentum of a
line is used, so this is an independent check of `ibpred.family.polynomials`.
"""

from __future__ import annotations

from collections.abc import Iterator
from itertools import combinations

from ibpred.errors import InputError
from ibpred.exact.rational import Rational
from ibpred.family.definition import FamilyDefinition, Graph
from ibpred.family.polynomials import Exponents, ParameterPolynomial, symanzik


def forest_polynomials(family: FamilyDefinition) -> tuple[ParameterPolynomial, ParameterPolynomial]:
    """U and F of the family's graph.

    Returns
    -------
    (U, F)
        Over the parameters of all lines, as `ibpred.family.polynomials.symanzik`.

    Raises
    ------
    InputError
        If the family comes from no graph.
    """
    graph = _graph(family)
    ring = family.kinematic_ring
    first: dict[Exponents, Rational] = {}
    for _, kept in _forests(graph, 1):
        first[_complement(family, kept)] = ring.one
    second: dict[Exponents, Rational] = {}

    def add(exponents: Exponents, value: Rational) -> None:
        second[exponents] = second[exponents] + value if exponents in second else value

    for root, kept in _forests(graph, 2):
        add(_complement(family, kept), -_inflow_squared(family, graph, root))
    for exponents in first:
        for line in family.propagators:
            if family.lines[line].mass2:
                raised = (*exponents[:line], exponents[line] + 1, *exponents[line + 1 :])
                add(raised, family.lines[line].mass2)
    count = len(family.lines)
    return (
        ParameterPolynomial(ring, count, first),
        ParameterPolynomial(ring, count, {e: v for e, v in second.items() if v}),
    )


def agrees_with_graph(family: FamilyDefinition) -> bool:
    """Whether the lines' momenta and the graph give the same U and F.

    Raises
    ------
    InputError
        If the family comes from no graph.
    """
    return forest_polynomials(family) == symanzik(family)


def _graph(family: FamilyDefinition) -> Graph:
    if family.graph is None:
        raise InputError(f"{family.name} comes from no graph")
    return family.graph


def _forests(graph: Graph, trees: int) -> Iterator[tuple[dict[int, int], tuple[int, ...]]]:
    """Spanning forests of so many trees: the root of each vertex, and the edges kept."""
    vertices = sorted({vertex for edge in graph.edges for vertex in edge})
    if len(vertices) < trees:
        return
    for kept in combinations(range(len(graph.edges)), len(vertices) - trees):
        root = {vertex: vertex for vertex in vertices}
        for number in kept:
            a, b = (root[vertex] for vertex in graph.edges[number])
            if a == b:
                break  # a cycle
            root = {vertex: a if r == b else r for vertex, r in root.items()}
        else:
            yield root, kept


def _complement(family: FamilyDefinition, kept: tuple[int, ...]) -> Exponents:
    exponents = [0] * len(family.lines)
    for number, line in enumerate(family.propagators):
        exponents[line] = int(number not in kept)
    return tuple(exponents)


def _inflow_squared(family: FamilyDefinition, graph: Graph, root: dict[int, int]) -> Rational:
    """Square of the momentum that enters the tree without the dependent leg."""
    total = family.kinematic_ring.zero
    if graph.rest is None:
        return total
    inside = [family.external.index(name) for name, vertex in graph.legs if root[vertex] != root[graph.rest]]
    for e in inside:
        for f in inside:
            total = total + family.gram[e][f]
    return total
