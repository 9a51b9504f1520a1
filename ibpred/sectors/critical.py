"""Number of critical points of G = U + F: a count of masters that uses no identity.

The masters of a sector, before symmetries, are as many as the critical points of G off G = 0, counted
with multiplicity, where these are isolated (R.N. Lee, A.A. Pomeransky, arXiv:1308.6676). With
U and F homogeneous of degrees L and L + 1, G = U / (L + 1) at a critical point, so G is not zero
where U is not. The points are counted over a prime field at random values of the invariants.
"""

from __future__ import annotations

import random
from dataclasses import dataclass

from ibpred.exact.groebner import ModularPolynomial, TooLargeError, groebner_basis, quotient_dimension
from ibpred.family.definition import FamilyDefinition
from ibpred.family.polynomials import symanzik
from ibpred.sectors.order import lines_of

LARGEST = 400_000
"""Bound on the entries of a matrix, so that no sector takes more than about a second."""

ON_EDGE = "a critical point has a vanishing parameter, so masters may be more than points"
"""Such a point is not generic: with the boundary that it lies on it may stand for several masters."""


@dataclass(frozen=True)
class CriticalPoints:
    """The critical points of a sector.

    Attributes
    ----------
    sector
        The sector.
    count
        Number of points with multiplicity; None where it is not decided.
    note
        Why it is not decided, or why it may be too small; else empty.
    """

    sector: int
    count: int | None
    note: str


def critical_points(family: FamilyDefinition, sector: int, prime: int, seed: int) -> CriticalPoints:
    """Count the critical points of a sector's G.

    Parameters
    ----------
    family, sector
        A sector that does not vanish.
    prime, seed
        The field, and the seed of the random values of the invariants.
    """
    lines = lines_of(sector)
    source = random.Random(seed)
    values = [source.randrange(2, prime) for _ in family.kinematic_ring.names]
    parts: list[dict[tuple[int, ...], int]] = []
    for polynomial in symanzik(family):
        found: dict[tuple[int, ...], int] = {}
        for exponents, coefficient in polynomial.restrict(sector).terms.items():
            residue = coefficient.modular(values, prime)
            if residue:
                found[tuple(exponents[i] for i in lines)] = residue
        parts.append(found)
    first, second = parts
    # the last variable is 1/U
    system: list[ModularPolynomial] = [
        {**{(*e, 1): c for e, c in first.items()}, (0,) * (len(lines) + 1): prime - 1}
    ]
    total = {**first, **second}
    for i in range(len(lines)):
        slope = {(*e[:i], e[i] - 1, *e[i + 1 :], 0): c * e[i] % prime for e, c in total.items() if e[i]}
        system.append({e: c for e, c in slope.items() if c})
    width = len(lines) + 1
    try:
        basis = groebner_basis(system, prime, LARGEST)
        count = quotient_dimension(basis, width)
        if count is None:
            return CriticalPoints(sector, None, "the critical points are not isolated")
        for i in range(len(lines)):
            edge: ModularPolynomial = {tuple(int(j == i) for j in range(width)): 1}
            if count and quotient_dimension(groebner_basis([*basis, edge], prime, LARGEST), width):
                return CriticalPoints(sector, count, ON_EDGE)
    except TooLargeError:
        return CriticalPoints(sector, None, "the system is too large")
    return CriticalPoints(sector, count, "")
