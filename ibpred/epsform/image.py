"""A block of the system as integer tables, and its image at numeric eps modulo a prime."""

from __future__ import annotations

from dataclasses import dataclass

import flint

from ibpred.epsform.form import Matrix
from ibpred.epsform.pencil import ModularPolynomial, Pencil
from ibpred.epsform.places import Place, places_of
from ibpred.errors import UnfinishedError
from ibpred.exact.rational import Polynomial, Ring

Terms = tuple[tuple[int, int, int], ...]
"""A polynomial: (power of eps, power of x, coefficient)."""


@dataclass(frozen=True)
class Pattern:
    """A block as integer tables, ready for evaluation at (eps, prime).

    Attributes
    ----------
    ring, name
        The ring of the block and the variable x.
    numerators, denominator
        The block over one common denominator.
    places, place_terms
        The finite poles.
    """

    ring: Ring
    name: str
    numerators: tuple[tuple[Terms, ...], ...]
    denominator: Terms
    places: tuple[Place, ...]
    place_terms: tuple[Terms, ...]


def block_pattern(matrix: Matrix, ring: Ring, name: str) -> Pattern:
    """Tables of a block over one common denominator.

    Raises
    ------
    UnfinishedError
        If the block depends on other variables than eps and x.
    """
    common = ring.context.constant(1)
    entries = [e for row in matrix for e in row]
    for entry in entries:
        common = common * (entry.denominator / common.gcd(entry.denominator))
    places = places_of(entries, ring, name)
    return Pattern(
        ring,
        name,
        tuple(
            tuple(_terms(e.numerator * (common / e.denominator), ring, name) for e in row) for row in matrix
        ),
        _terms(common, ring, name),
        places,
        tuple(_terms(p.polynomial, ring, name) for p in places),
    )


def _terms(polynomial: Polynomial, ring: Ring, name: str) -> Terms:
    """(power of eps, power of x, coefficient)."""
    eps, x = ring.index("eps"), ring.index(name)
    found = []
    for exponents, coefficient in polynomial.to_dict().items():
        if sum(map(int, exponents)) != int(exponents[eps]) + int(exponents[x]):
            raise UnfinishedError(f"a coupled block may depend on eps and {name} only")
        found.append((int(exponents[eps]), int(exponents[x]), int(coefficient)))
    return tuple(found)


def _image(terms: Terms, powers: list[int], prime: int) -> ModularPolynomial:
    """A polynomial in x modulo the prime at the eps whose powers are given."""
    values = [0] * (max((x for _, x, _ in terms), default=0) + 1)
    for eps, x, coefficient in terms:
        values[x] += coefficient * powers[eps]
    return flint.nmod_poly([v % prime for v in values], prime)


def _powers(pattern: Pattern, eps: int, prime: int) -> list[int]:
    tables = [*(t for row in pattern.numerators for t in row), pattern.denominator, *pattern.place_terms]
    top = max((e for table in tables for e, _, _ in table), default=0)
    powers = [1]
    for _ in range(top):
        powers.append(powers[-1] * eps % prime)
    return powers


def _points(pattern: Pattern, powers: list[int], prime: int) -> list[tuple[int, int]] | None:
    """(index of the place, root) for all roots; None where a place does not split or two meet."""
    found: list[tuple[int, int]] = []
    for index, (place, terms) in enumerate(zip(pattern.places, pattern.place_terms, strict=True)):
        roots = _image(terms, powers, prime).roots()
        if len(roots) != place.degree:
            return None
        found.extend((index, int(root)) for root, _ in sorted((int(r), m) for r, m in roots))
    return found if len({point for _, point in found}) == len(found) else None


def splits(pattern: Pattern, prime: int) -> bool:
    """Whether the places that do not move have all their roots modulo the prime."""
    for place, terms in zip(pattern.places, pattern.place_terms, strict=True):
        if not place.moves and len(_image(terms, [1], prime).roots()) != place.degree:
            return False
    return True


def pencil_at(pattern: Pattern, eps: int, prime: int) -> tuple[Pencil, list[tuple[int, int]]] | None:
    """The system at a numeric eps and its poles; None where these do not split or two of them meet."""
    powers = _powers(pattern, eps, prime)
    points = _points(pattern, powers, prime)
    if points is None:
        return None
    numerators = tuple(tuple(_image(t, powers, prime) for t in row) for row in pattern.numerators)
    return Pencil(prime, numerators, _image(pattern.denominator, powers, prime)), points
