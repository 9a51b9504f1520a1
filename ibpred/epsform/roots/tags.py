"""Square roots carried as tags, so that all algebra stays rational.

A function with the tag P is ``sqrt(P)`` times a function g of the rational basis, P a product of different
irreducible polynomials. A coupling of g_j into the equation of g_i is written as ``W B`` with W the product
of the factors that only the tag of j has; between the functions themselves it is ``sqrt(R) B`` with R
the product of all factors that only one of the two has. Wherever R vanishes, ``sqrt(R) B`` is as good as
Fuchsian where B has a simple pole, so B is treated alike at all places.
"""

from __future__ import annotations

from collections.abc import Sequence

from ibpred.epsform.form import Matrix
from ibpred.exact.rational import Polynomial, Rational, Ring

Tag = tuple[Rational, ...]
"""Irreducible polynomials, positive at the corner, in canonical order."""


def tag_of(polynomials: Sequence[Polynomial], ring: Ring, variables: Sequence[str]) -> Tag:
    """A tag from irreducible polynomials without common factors."""
    one = ring.context.constant(1)
    elements = [Rational(ring, corner_positive(p, ring, variables), one) for p in polynomials]
    return canonical(elements)


def canonical(elements: Sequence[Rational]) -> Tag:
    """The canonical order."""
    return tuple(sorted(elements, key=lambda e: (int(e.numerator.total_degree()), len(e.numerator), str(e))))


def corner_positive(polynomial: Polynomial, ring: Ring, variables: Sequence[str]) -> Polynomial:
    """The polynomial or its negative: positive where the first variable is small, the second less so, ..."""
    places = [ring.index(name) for name in variables]
    terms = polynomial.to_dict()
    lowest = min(terms, key=lambda e: tuple(int(e[k]) for k in places))
    return polynomial if terms[lowest] > 0 else -polynomial


def product_of(factors: Sequence[Rational], ring: Ring) -> Rational:
    """Their product; one if there are none."""
    total = ring.one
    for factor in factors:
        total = total * factor
    return total


def only_in(tag: Tag, other: Tag) -> Tag:
    """Factors of one tag that another does not have."""
    return tuple(factor for factor in tag if factor not in other)


def difference(left: Tag, right: Tag) -> Tag:
    """Factors that exactly one of two tags has."""
    return canonical((*only_in(left, right), *only_in(right, left)))


def root_class(left: Tag, right: Tag) -> str:
    """A key for the root that a coupling between two tags carries; empty for none."""
    return "*".join(f"({factor})" for factor in difference(left, right))


def between_functions(matrix: Matrix, tags: Sequence[Tag], name: str, ring: Ring) -> Matrix:
    """From the rational basis to the entries B of ``sqrt(R) B`` between the functions themselves.

    Parameters
    ----------
    matrix
        Of the equation in `name` for the rational functions g.
    tags
        One for each function.
    """
    rows = []
    for i, row in enumerate(matrix):
        line = []
        for j, entry in enumerate(row):
            if i == j:
                for factor in tags[i]:
                    entry = entry + factor.derivative(name) / factor / 2
            elif entry:
                entry = entry / product_of(only_in(tags[j], tags[i]), ring)
            line.append(entry)
        rows.append(tuple(line))
    return tuple(rows)


def between_rationals(matrix: Matrix, tags: Sequence[Tag], name: str, ring: Ring) -> Matrix:
    """The inverse of `between_functions`."""
    rows = []
    for i, row in enumerate(matrix):
        line = []
        for j, entry in enumerate(row):
            if i == j:
                for factor in tags[i]:
                    entry = entry - factor.derivative(name) / factor / 2
            elif entry:
                entry = entry * product_of(only_in(tags[j], tags[i]), ring)
            line.append(entry)
        rows.append(tuple(line))
    return tuple(rows)
