"""Products of numerators under a map between sectors, expanded in the lines of the target."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ibpred.errors import UnfinishedError
from ibpred.exact.rational import Polynomial, Rational
from ibpred.family.definition import FamilyDefinition
from ibpred.identities.packing import Packing, packing
from ibpred.identities.products import internal
from ibpred.identities.templates import common_denominator
from ibpred.sectors.mapping import SectorMap
from ibpred.sectors.order import lines_of

IntArray = NDArray[np.int64]
Terms = tuple[IntArray, IntArray]
"""Codes (lines' exponents, then the monomial's) and integer coefficients."""


@dataclass(frozen=True)
class NumeratorImages:
    """The images of the possible numerators of a map's source sector.

    Attributes
    ----------
    lines
        The lines that can be numerators: those outside the source sector that have images.
    factors
        For each of them the image times its denominator, as terms.
    denominators
        For each of them the denominator, as terms (a polynomial in the invariants).
    code
        Packing of the exponents of the lines, then of the internal ring's variables.
    width
        Number of lines of the family.
    """

    lines: tuple[int, ...]
    factors: tuple[Terms, ...]
    denominators: tuple[Terms, ...]
    code: Packing
    width: int


def numerator_images(map_: SectorMap, family: FamilyDefinition, rank: int) -> NumeratorImages:
    """Prepare a map for numerators up to a rank.

    Raises
    ------
    UnfinishedError
        If the products do not fit 64 bits.
    """
    ring = family.internal_ring
    inside = set(lines_of(map_.source))
    lines = tuple(i for i in range(len(family.lines)) if i not in inside and map_.reaches(i))
    width = len(family.lines)
    cleared: list[tuple[list[tuple[int, Polynomial]], Polynomial]] = []
    degree = 0
    for i in lines:
        image = map_.images[i]
        assert image is not None, "only lines with images are numerators here"
        constant, entries = image
        values: list[tuple[int, Rational]] = [(-1, internal(constant, family))]
        values += [(line, internal(value, family)) for line, value in entries]
        common = common_denominator((value for _, value in values), ring)
        parts = [(line, v.numerator * (common / v.denominator)) for line, v in values if v]
        cleared.append((parts, common))
        degree = max([degree, common.total_degree(), *(part.total_degree() for _, part in parts)])
    variables = len(ring.names)
    code = packing([0] * (width + variables), [rank] * width + [rank * degree] * variables)

    def terms(parts: list[tuple[int, Polynomial]]) -> Terms:
        found: dict[tuple[int, ...], int] = {}
        for line, polynomial in parts:
            lead = [int(b == line) for b in range(width)]
            for exponents, c in polynomial.to_dict().items():
                found[(*lead, *map(int, exponents))] = int(c)
        vectors = np.array(list(found), dtype=np.int64).reshape(len(found), width + variables)
        # object to int64 raises OverflowError by itself where a coefficient is too large
        return code.shift(vectors), np.array(list(found.values()), dtype=np.int64)

    return NumeratorImages(
        lines,
        tuple(terms(parts) for parts, _ in cleared),
        tuple(terms([(-1, common)]) for _, common in cleared),
        code,
        width,
    )


def product(left: Terms, right: Terms) -> Terms:
    """Product of two polynomials given as terms.

    Raises
    ------
    UnfinishedError
        If a coefficient does not fit 64 bits.
    """
    bound = float(np.abs(left[1]).astype(float).sum()) * float(np.abs(right[1]).astype(float).sum())
    if bound > 2.0**62:
        raise UnfinishedError(
            "symmetry relations: numerators of this rank have coefficients beyond 64 bits; "
            "ask for a lower rank"
        )
    codes = (left[0][:, None] + right[0][None, :]).ravel()
    values = (left[1][:, None] * right[1][None, :]).ravel()
    order = np.argsort(codes, kind="stable")
    codes, values = codes[order], values[order]
    first = np.flatnonzero(np.concatenate([[True], codes[1:] != codes[:-1]]))
    sums = np.add.reduceat(values, first)
    kept = sums != 0
    return codes[first][kept], sums[kept]


ONE: Terms = (np.zeros(1, dtype=np.int64), np.ones(1, dtype=np.int64))


def expand(
    images: tuple[Terms, ...], exponents: tuple[int, ...], memo: dict[tuple[int, ...], Terms]
) -> Terms:
    """``prod_j images[j]^exponents[j]``; `memo` keeps the products met on the way."""
    if exponents in memo:
        return memo[exponents]
    place = next((i for i, e in enumerate(exponents) if e), None)
    if place is None:
        return ONE
    rest = (*exponents[:place], exponents[place] - 1, *exponents[place + 1 :])
    found = product(expand(images, rest, memo), images[place])
    memo[exponents] = found
    return found
