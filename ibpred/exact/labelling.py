"""Canonical form of a polynomial under renaming of its variables.

A polynomial is turned into a coloured graph: a vertex for each variable, one for each monomial
(coloured by its label), an edge where a variable occurs in a monomial; powers above one go through
an extra vertex coloured by the power. Two polynomials agree up to a renaming of variables if and
only if their graphs are isomorphic; the canonical labelling of the graph is the method of
T. Junttila, P. Kaski (2007), as offered by igraph. Comparing sectors through a canonical
order of the parameters goes back to A. Pak, arXiv:1111.0868.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import igraph

Exponents = tuple[int, ...]
Term = tuple[Exponents, str]
"""Exponents and label of a monomial; the label stands for its coefficient (and whatever else must agree)."""

Permutation = tuple[int, ...]
"""``perm[i]`` is what i becomes."""

Key = tuple[tuple[str, ...], tuple[tuple[str, Exponents], ...]]


@dataclass(frozen=True)
class CanonicalForm:
    """The canonical form of a polynomial.

    Attributes
    ----------
    key
        Colours of the variables and (label, exponents) of the monomials, in canonical order; equal
        for two polynomials if and only if a renaming of variables carries one into the other.
    place
        ``place[i]`` is the position of variable i in the canonical order.
    """

    key: Key
    place: Permutation


def canonical_form(terms: Sequence[Term], colours: Sequence[str]) -> CanonicalForm:
    """Canonical form under all renamings of variables that keep their colours.

    Parameters
    ----------
    terms
        The monomials, each with one exponent for each variable; the pairs are distinct.
    colours
        One for each variable.
    """
    graph, colour = _coloured_graph(terms, colours)
    count = len(colours)
    # releases of igraph disagree on the direction of a permutation, so vertices carry their number
    graph.vs["number"] = list(range(graph.vcount()))
    canonical = graph.permute_vertices(graph.canonical_permutation(color=colour))
    order = [vertex for vertex in canonical.vs["number"] if vertex < count]
    place = [0] * count
    for position, i in enumerate(order):
        place[i] = position
    renamed = sorted((text, tuple(exponents[i] for i in order)) for exponents, text in terms)
    return CanonicalForm((tuple(colours[i] for i in order), tuple(renamed)), tuple(place))


def isomorphism(source: CanonicalForm, target: CanonicalForm) -> Permutation | None:
    """One renaming of variables that carries `source` into `target`, or None."""
    if source.key != target.key:
        return None
    return compose(source.place, inverse(target.place))


def automorphism_generators(terms: Sequence[Term], colours: Sequence[str]) -> tuple[Permutation, ...]:
    """Generators of the renamings of variables that leave the polynomial as it is, none trivial."""
    graph, colour = _coloured_graph(terms, colours)
    count = len(colours)
    trivial = tuple(range(count))
    found = {tuple(generator[:count]) for generator in graph.automorphism_group(color=colour)}
    return tuple(sorted(found - {trivial}))


def group_elements(generators: Sequence[Permutation], size: int) -> Iterator[Permutation]:
    """All elements of a permutation group, the identity first, short products before long ones."""
    identity = tuple(range(size))
    seen = {identity}
    front = [identity]
    yield identity
    while front:
        following = []
        for element in front:
            for generator in generators:
                product = compose(element, generator)
                if product not in seen:
                    seen.add(product)
                    following.append(product)
                    yield product
        front = following


def compose(first: Permutation, then: Permutation) -> Permutation:
    """`first`, followed by `then`."""
    return tuple(then[i] for i in first)


def inverse(permutation: Permutation) -> Permutation:
    """The permutation that undoes another."""
    result = [0] * len(permutation)
    for i, image in enumerate(permutation):
        result[image] = i
    return tuple(result)


def _coloured_graph(terms: Sequence[Term], colours: Sequence[str]) -> tuple[igraph.Graph, list[int]]:
    if len(set(terms)) != len(terms):
        raise ValueError("the monomials of a polynomial must be distinct")
    kinds: list[tuple[int, str]] = [(0, colour) for colour in colours]
    edges: list[tuple[int, int]] = []
    power_vertex: dict[tuple[int, int], int] = {}
    for exponents, _ in terms:
        if len(exponents) != len(colours):
            raise ValueError(f"{len(exponents)} exponents for {len(colours)} variables")
        for i, exponent in enumerate(exponents):
            if exponent > 1 and (i, exponent) not in power_vertex:
                power_vertex[i, exponent] = len(kinds)
                edges.append((i, len(kinds)))
                kinds.append((1, str(exponent)))
    for exponents, text in terms:
        monomial = len(kinds)
        kinds.append((2, text))
        for i, exponent in enumerate(exponents):
            if exponent:
                edges.append((power_vertex.get((i, exponent), i), monomial))
    # colours are numbered by their text, so that the numbering itself is canonical
    number = {kind: c for c, kind in enumerate(sorted(set(kinds)))}
    return igraph.Graph(n=len(kinds), edges=edges), [number[kind] for kind in kinds]
