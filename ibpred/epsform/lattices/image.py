"""A block of the system as integer tables, and its image at numeric parameters modulo a prime.

The parameters are eps and all ratios but the one, x, in which the block is a differential system.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import flint

from ibpred.epsform.form import Matrix
from ibpred.epsform.lattices.pencil import ModularPolynomial, Pencil
from ibpred.epsform.places import Place, places_of
from ibpred.exact.rational import Polynomial, Ring

Terms = tuple[tuple[tuple[int, ...], int, int], ...]
"""A polynomial: (powers of the parameters, power of x, coefficient)."""


@dataclass(frozen=True)
class Pattern:
    """A block as integer tables, ready for evaluation at numeric parameters modulo a prime.

    Attributes
    ----------
    ring, name
        The ring of the block and the variable x.
    parameters
        The other variables, eps first.
    numerators, denominator
        The block over one common denominator.
    places, place_terms
        The finite poles.
    """

    ring: Ring
    name: str
    parameters: tuple[str, ...]
    numerators: tuple[tuple[Terms, ...], ...]
    denominator: Terms
    places: tuple[Place, ...]
    place_terms: tuple[Terms, ...]


def block_pattern(matrix: Matrix, ring: Ring, name: str) -> Pattern:
    """Tables of a block over one common denominator."""
    common = ring.context.constant(1)
    entries = [e for row in matrix for e in row]
    for entry in entries:
        common = common * (entry.denominator / common.gcd(entry.denominator))
    places = places_of(entries, ring, name)
    parameters = ("eps", *(n for n in ring.names if n not in ("eps", name)))

    def terms(polynomial: Polynomial) -> Terms:
        order = [ring.index(n) for n in parameters]
        x = ring.index(name)
        return tuple(
            (tuple(int(exponents[i]) for i in order), int(exponents[x]), int(coefficient))
            for exponents, coefficient in polynomial.to_dict().items()
        )

    numerators = tuple(tuple(terms(e.numerator * (common / e.denominator)) for e in row) for row in matrix)
    polynomials = tuple(terms(p.polynomial) for p in places)
    return Pattern(ring, name, parameters, numerators, terms(common), places, polynomials)


def _image(terms: Terms, powers: Sequence[Sequence[int]], prime: int) -> ModularPolynomial:
    """A polynomial in x modulo the prime, the powers of each parameter given."""
    values = [0] * (max((x for _, x, _ in terms), default=0) + 1)
    for exponents, x, coefficient in terms:
        for exponent, table in zip(exponents, powers, strict=True):
            if exponent:
                coefficient = coefficient * table[exponent] % prime
        values[x] += coefficient
    return flint.nmod_poly([v % prime for v in values], prime)


def _powers(pattern: Pattern, values: Sequence[int], prime: int) -> list[list[int]]:
    tables = [*(t for row in pattern.numerators for t in row), pattern.denominator, *pattern.place_terms]
    found = []
    for k, value in enumerate(values):
        top = max((e[k] for table in tables for e, _, _ in table), default=0)
        powers = [1]
        for _ in range(top):
            powers.append(powers[-1] * value % prime)
        found.append(powers)
    return found


def _points(pattern: Pattern, powers: Sequence[Sequence[int]], prime: int) -> list[tuple[int, int]] | None:
    """(index of the place, root) for all roots; None where a place does not split or two meet."""
    found: list[tuple[int, int]] = []
    for index, (place, terms) in enumerate(zip(pattern.places, pattern.place_terms, strict=True)):
        roots = _image(terms, powers, prime).roots()
        if len(roots) != place.degree:
            return None
        found.extend((index, int(root)) for root, _ in sorted((int(r), m) for r, m in roots))
    return found if len({point for _, point in found}) == len(found) else None


def splits(pattern: Pattern, prime: int) -> bool:
    """Whether the places without parameters have all their roots modulo the prime."""
    for place, terms in zip(pattern.places, pattern.place_terms, strict=True):
        if any(any(exponents) for exponents, _, _ in terms):
            continue
        if len(_image(terms, [[1]] * len(pattern.parameters), prime).roots()) != place.degree:
            return False
    return True


def pencil_at(
    pattern: Pattern, values: Sequence[int], prime: int
) -> tuple[Pencil, list[tuple[int, int]]] | None:
    """The system at numeric parameters and its poles; None where these do not split or two of them meet."""
    powers = _powers(pattern, values, prime)
    points = _points(pattern, powers, prime)
    if points is None:
        return None
    numerators = tuple(tuple(_image(t, powers, prime) for t in row) for row in pattern.numerators)
    return Pencil(prime, numerators, _image(pattern.denominator, powers, prime)), points
