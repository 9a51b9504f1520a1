"""Gröbner bases of small systems over a prime field, and the dimension of the quotient.

Pairs of one degree are reduced together by one echelon form (J.-C. Faugère, J. Pure Appl. Algebra 139
(1999) 61), superfluous pairs are left out (R. Gebauer, H.M. Möller, J. Symb. Comput. 6 (1988) 275).
The order is by degree, then reverse lexicographic.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field

import flint

Monomial = tuple[int, ...]
ModularPolynomial = Mapping[Monomial, int]
"""Exponents -> nonzero residue."""


class TooLargeError(Exception):
    """The basis needs a larger matrix than is allowed."""


def order_key(monomial: Monomial) -> tuple[int, tuple[int, ...]]:
    """Key of the order; the larger key is the larger monomial."""
    return sum(monomial), tuple(-e for e in reversed(monomial))


def groebner_basis(
    polynomials: Iterable[ModularPolynomial], prime: int, largest: int
) -> tuple[ModularPolynomial, ...]:
    """A Gröbner basis, its elements monic, leading monomials minimal.

    Parameters
    ----------
    polynomials
        Generators of the ideal; all exponents of the same length.
    prime
        The field.
    largest
        Bound on the entries of a matrix.

    Raises
    ------
    TooLargeError
        If a matrix would exceed the bound.
    """
    state = _State(prime)
    for polynomial in sorted((p for p in polynomials if p), key=lambda p: order_key(max(p, key=order_key))):
        state.add(polynomial)
    while state.pairs:
        degree = min(sum(pair[0]) for pair in state.pairs)
        chosen = [pair for pair in state.pairs if sum(pair[0]) == degree]
        state.pairs = [pair for pair in state.pairs if sum(pair[0]) != degree]
        for polynomial in _reduced(state, chosen, largest):
            state.add(polynomial)
    kept = [
        (lead, p)
        for number, (lead, p) in enumerate(zip(state.leads, state.basis, strict=True))
        if state.active[number]
    ]
    return tuple(
        p for lead, p in kept if not any(other != lead and _divides(other, lead) for other, _ in kept)
    )


def quotient_dimension(basis: Sequence[ModularPolynomial], variables: int) -> int | None:
    """Dimension of the polynomials modulo the ideal of a Gröbner basis; None if it is infinite."""
    leads = [max(p, key=order_key) for p in basis]
    if any(not any(lead) for lead in leads):
        return 0
    bounds = []
    for i in range(variables):
        powers = [lead[i] for lead in leads if sum(lead) == lead[i]]
        if not powers:
            return None
        bounds.append(min(powers))
    count = 0
    # standard monomials are closed under division: grow them one variable after the other
    front: list[Monomial] = [(0,) * variables]
    for i in range(variables):
        grown = []
        for monomial in front:
            for e in range(bounds[i]):
                candidate = (*monomial[:i], e, *monomial[i + 1 :])
                if any(_divides(lead, candidate) for lead in leads):
                    break
                grown.append(candidate)
        front = grown
    count = len(front)
    return count


@dataclass
class _State:
    """The growing basis."""

    prime: int
    basis: list[ModularPolynomial] = field(default_factory=list)
    leads: list[Monomial] = field(default_factory=list)
    active: list[bool] = field(default_factory=list)
    pairs: list[tuple[Monomial, int, int]] = field(default_factory=list)

    def add(self, polynomial: ModularPolynomial) -> None:
        """Add an element and the pairs that it makes, by the criteria of Gebauer and Möller."""
        lead = max(polynomial, key=order_key)
        inverse = pow(polynomial[lead], -1, self.prime)
        new = len(self.basis)
        fresh = [(_lcm(lead, other), old, new) for old, other in enumerate(self.leads) if self.active[old]]
        self.pairs = [
            pair
            for pair in self.pairs
            if not _divides(lead, pair[0])
            or pair[0] in (_lcm(self.leads[pair[1]], lead), _lcm(self.leads[pair[2]], lead))
        ]
        kept: list[tuple[Monomial, int, int]] = []
        for number, pair in enumerate(fresh):
            coprime = _coprime(lead, self.leads[pair[1]])
            later, earlier = fresh[number + 1 :], kept
            if coprime or not any(_divides(other[0], pair[0]) for other in (*later, *earlier)):
                kept.append(pair)
        self.pairs += [pair for pair in kept if not _coprime(lead, self.leads[pair[1]])]
        for old, other in enumerate(self.leads):
            if self.active[old] and _divides(lead, other):
                self.active[old] = False
        self.basis.append({m: c * inverse % self.prime for m, c in polynomial.items()})
        self.leads.append(lead)
        self.active.append(True)


def _reduced(
    state: _State, pairs: Sequence[tuple[Monomial, int, int]], largest: int
) -> list[ModularPolynomial]:
    """New elements: combinations of the pairs' halves with leading monomials that none had before."""
    rows: dict[tuple[int, Monomial], None] = {}
    for top, first, second in pairs:
        for number in (first, second):
            rows[number, _quotient(top, state.leads[number])] = None
    seen: set[Monomial] = set()
    heads = {top for top, _, _ in pairs}
    table: list[dict[Monomial, int]] = []
    waiting = list(rows)
    active = [(state.leads[i], i) for i in range(len(state.basis)) if state.active[i]]
    while waiting:
        number, factor = waiting.pop()
        row = {_product(m, factor): c for m, c in state.basis[number].items()}
        table.append(row)
        for monomial in row:
            if monomial in seen:
                continue
            seen.add(monomial)
            if monomial in heads:
                continue
            divisor = next((i for lead, i in active if _divides(lead, monomial)), None)
            if divisor is not None:
                heads.add(monomial)
                waiting.append((divisor, _quotient(monomial, state.leads[divisor])))
        if len(table) * len(seen) > largest:
            raise TooLargeError(f"more than {largest} matrix entries")
    columns = sorted(seen, key=order_key, reverse=True)
    place = {monomial: i for i, monomial in enumerate(columns)}
    flat = [0] * (len(table) * len(columns))
    for r, row in enumerate(table):
        base = r * len(columns)
        for monomial, c in row.items():
            flat[base + place[monomial]] = c
    echelon, rank = flint.nmod_mat(len(table), len(columns), flat, state.prime).rref()
    found = []
    for r in range(rank):
        entries = [(columns[i], int(echelon[r, i])) for i in range(len(columns)) if int(echelon[r, i])]
        if entries[0][0] not in heads:
            found.append(dict(entries))
    return sorted(found, key=lambda p: order_key(max(p, key=order_key)))


def _divides(a: Monomial, b: Monomial) -> bool:
    return all(x <= y for x, y in zip(a, b, strict=True))


def _coprime(a: Monomial, b: Monomial) -> bool:
    return not any(x and y for x, y in zip(a, b, strict=True))


def _lcm(a: Monomial, b: Monomial) -> Monomial:
    return tuple(map(max, a, b))


def _product(a: Monomial, b: Monomial) -> Monomial:
    return tuple(x + y for x, y in zip(a, b, strict=True))


def _quotient(a: Monomial, b: Monomial) -> Monomial:
    return tuple(x - y for x, y in zip(a, b, strict=True))
