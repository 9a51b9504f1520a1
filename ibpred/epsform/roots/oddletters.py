"""Letters with a square root, found by linear algebra.

A letter ``(P - sqrt Q)/(P + sqrt Q)``, P = A/B, is singular only where ``A^2 - B^2 Q`` or B vanishes, so B
is a product of known letters, and ``A^2 = B^2 Q + c W`` with W another one and c a number (a zero of Q may
occur in W, once). For each B and W of bounded degree the c that make ``B^2 Q + c W`` a square are found on a
random line modulo a prime (zeros of the discriminant), confirmed on a second line, and A is then an exact
polynomial square root. The logarithmic derivative is

    dlog = sqrt(Q) (2 Q dP - P dQ) / (Q (P^2 - Q)).
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from random import Random
from typing import Any

import flint
from flint.utils.flint_exceptions import DomainError

from ibpred.epsform.residues.decompose import constants
from ibpred.epsform.roots.tags import Tag, product_of
from ibpred.exact.polynomial import residue
from ibpred.exact.rational import Polynomial, Rational, Ring
from ibpred.reconstruct.lift import rational_number

_SPLIT_TESTS = 12
_LARGEST_FACTOR = 10**4
_SPARE_ROWS = 12

ModularPolynomial = Any  # flint.nmod_poly
Entries = Mapping[tuple[int, int], Mapping[str, Rational]]
"""For each coupling its component in each ratio, the factor sqrt(Q) left out."""


@dataclass(frozen=True)
class OddFit:
    """Letters of one root with the coefficients of each coupling."""

    polynomials: tuple[Rational, ...]
    coefficients: Mapping[tuple[int, int], tuple[Fraction, ...]]


def fit_odd(
    entries: Entries, roots: Tag, letters: Sequence[Rational], ring: Ring, primes: Sequence[int], seed: int
) -> OddFit | None:
    """Write couplings with a square root as combinations of dlogs of odd letters.

    Parameters
    ----------
    entries
        The couplings, free of eps; they stand for ``sqrt(Q)`` times what is given.
    roots
        The factors of Q.
    letters
        All known letters; zeros of P^2 - Q are looked for among them.
    ring
        The ring of all these.
    primes, seed
        For the modular search.

    Returns
    -------
    fit or None
        None where the letters found do not suffice. The coefficients are fitted at points; the caller
        checks the result by substitution.
    """
    square = product_of(roots, ring)
    size = int(square.numerator.total_degree())
    variables = tuple(next(iter(entries.values())))
    even = size + size % 2
    search = _Search(square, roots, letters, variables, primes[0], seed)
    found: list[Rational] = []
    for below, spare in _EFFORTS:
        for denominator in search.denominators(below):
            new = search.polynomials(denominator, even + 2 * below + spare)
            found += [p for p in new if p not in found]
        found.sort(key=_simplicity)
        fit = _fitted(entries, square, found, ring, seed)
        if fit is not None:
            return fit
    return None


_EFFORTS = ((0, 0), (0, 2), (1, 0), (2, 0))
"""Degree of B, and by how much the degree of W may exceed that of B^2 Q: tried until the letters suffice."""


def logarithmic(polynomial: Rational, square: Rational, name: str) -> Rational:
    """``dlog`` of the odd letter in one ratio, divided by sqrt(Q)."""
    top = square * polynomial.derivative(name) * 2 - polynomial * square.derivative(name)
    return top / (square * (polynomial * polynomial - square))


class _Search:
    """The search for P modulo one prime."""

    def __init__(
        self,
        square: Rational,
        roots: Tag,
        letters: Sequence[Rational],
        variables: Sequence[str],
        prime: int,
        seed: int,
    ) -> None:
        self.square, self.roots, self.ring = square, roots, square.ring
        self.places = [self.ring.index(name) for name in variables]
        self.prime = prime
        self.random = Random(seed)
        self.lines = [self._line(), self._line()]
        plain = [w for w in letters if not any(w == r or w == -r for r in roots)]
        self.others = [w for w in plain if self._splits(square, w)]
        self.letters = plain

    def denominators(self, size: int) -> Iterator[Rational]:
        """Products of letters of a given degree."""
        degrees = [int(w.numerator.total_degree()) for w in self.letters]
        for powers in _monomials(degrees, 0, size):
            if sum(p * d for p, d in zip(powers, degrees, strict=True)) == size:
                total = self.ring.one
                for letter, power in zip(self.letters, powers, strict=True):
                    total = total * letter**power
                yield total

    def polynomials(self, denominator: Rational, bound: int) -> list[Rational]:
        """All P with a given B, W of at most the given degree."""
        square = self.square * denominator * denominator
        q = [self._on_line(square.numerator, line) for line in self.lines]
        # a common factor of B and W would be one of A as well
        used = {str(factor) for factor, _ in denominator.factors()[1]}
        others = [w for w in self.others if str(w.numerator) not in used and str(-w.numerator) not in used]
        factors = [*self.roots, *others]
        images = [[self._on_line(w.numerator, line) for w in factors] for line in self.lines]
        degrees = [int(w.numerator.total_degree()) for w in factors]
        found: dict[str, Rational] = {}
        for powers in _monomials(degrees, len(self.roots), bound):
            w = [_power_product(image, powers, self.prime) for image in images]
            for c in self._factors(q[0], w[0]):
                number = rational_number(c, self.prime)
                if number is None or max(abs(number[0]), number[1]) > _LARGEST_FACTOR:
                    continue
                if not all(_is_square(a + b * c, self.prime) for a, b in zip(q, w, strict=True)):
                    continue
                product = square.ring.one
                for factor, power in zip(factors, powers, strict=True):
                    product = product * factor**power
                root = _square_root(square + product * Fraction(*number))
                if root is not None:
                    found.setdefault(str(root), root / denominator)
        return list(found.values())

    def _line(self) -> list[tuple[int, int]]:
        """A random line: (constant, slope) for every variable of the ring."""
        p = self.prime
        line = [(0, 0)] * len(self.ring.names)
        for place in self.places:
            line[place] = (self.random.randrange(p), self.random.randrange(1, p))
        return line

    def _on_line(self, polynomial: Polynomial, line: Sequence[tuple[int, int]]) -> ModularPolynomial:
        p = self.prime
        total = flint.nmod_poly([], p)
        coordinates = [flint.nmod_poly([a, b], p) for a, b in line]
        for exponents, coefficient in polynomial.to_dict().items():
            term = flint.nmod_poly([int(coefficient) % p], p)
            for coordinate, exponent in zip(coordinates, exponents, strict=True):
                if exponent:
                    term = term * coordinate ** int(exponent)
            total = total + term
        return total

    def _splits(self, square: Rational, letter: Rational) -> bool:
        """Whether Q is a square (times a square number) on the zeros of a letter, as far as tests tell."""
        passed = 0
        for _ in range(40 * _SPLIT_TESTS):
            line = self._line()
            for t, _ in self._on_line(letter.numerator, line).factor()[1]:
                if t.degree() != 1:
                    continue
                zero = -int(t[0]) * pow(int(t[1]), -1, self.prime) % self.prime
                values = [(a + b * zero) % self.prime for a, b in line]
                value = residue(square.numerator, values, self.prime)
                if value and pow(value, (self.prime - 1) // 2, self.prime) != 1:
                    return False
                passed += 1
            if passed >= _SPLIT_TESTS:
                return True
        return False

    def _factors(self, q: ModularPolynomial, w: ModularPolynomial) -> Iterator[int]:
        """Numbers c for which ``q + c w`` may be a square."""
        p = self.prime
        top = max(q.degree(), w.degree())
        if q.degree() == w.degree():
            yield -int(q.leading_coefficient()) * pow(int(w.leading_coefficient()), -1, p) % p
        if top % 2:
            return
        count = 2 * top - 1
        nodes = [self.random.randrange(1, p) for _ in range(count)]
        values = [int((q + w * node).discriminant()) for node in nodes]
        for factor, _ in _interpolated(nodes, values, p).factor()[1]:
            if factor.degree() == 1:
                yield -int(factor[0]) * pow(int(factor[1]), -1, p) % p


def _interpolated(nodes: Sequence[int], values: Sequence[int], prime: int) -> ModularPolynomial:
    total = flint.nmod_poly([], prime)
    basis = flint.nmod_poly([1], prime)
    for node, value in zip(nodes, values, strict=True):
        # Newton's form
        rest = (value - int(total(node))) * pow(int(basis(node)), -1, prime) % prime
        total = total + basis * rest
        basis = basis * flint.nmod_poly([-node % prime, 1], prime)
    return total


def _monomials(degrees: Sequence[int], simple: int, bound: int) -> Iterator[tuple[int, ...]]:
    """Exponents with total degree within the bound; those of the first letters are at most one."""

    def extend(index: int, left: int) -> Iterator[tuple[int, ...]]:
        if index == len(degrees):
            yield ()
            return
        most = left // degrees[index]
        for power in range(min(most, 1) + 1 if index < simple else most + 1):
            for rest in extend(index + 1, left - power * degrees[index]):
                yield (power, *rest)

    yield from extend(0, bound)


def _power_product(images: Sequence[ModularPolynomial], powers: Sequence[int], prime: int) -> Any:
    total = flint.nmod_poly([1], prime)
    for image, power in zip(images, powers, strict=True):
        if power:
            total = total * image**power
    return total


def _is_square(polynomial: ModularPolynomial, prime: int) -> bool:
    """Whether a polynomial is a number times a square."""
    if polynomial.is_zero() or polynomial.degree() % 2:
        return False
    return all(power % 2 == 0 for _, power in polynomial.factor_squarefree()[1])


def _square_root(value: Rational) -> Rational | None:
    """The exact square root of a polynomial with rational coefficients, None where there is none."""
    if not value:
        return None
    field = value.ring
    try:
        top = (value.numerator * value.denominator).sqrt()
    except DomainError:
        return None
    return field.fraction(top, value.denominator)


def _simplicity(polynomial: Rational) -> tuple[int, int, int, str]:
    terms = polynomial.numerator.to_dict()
    height = max(abs(int(c)) for c in terms.values())
    size = int(polynomial.numerator.total_degree()) + 2 * int(polynomial.denominator.total_degree())
    return size, len(terms), height, str(polynomial)


def _fitted(
    entries: Entries, square: Rational, polynomials: Sequence[Rational], ring: Ring, seed: int
) -> OddFit | None:
    if not polynomials:
        return None
    variables = tuple(next(iter(entries.values())))
    forms = [[logarithmic(p, square, name) for name in variables] for p in polynomials]
    pairs = list(entries)
    random = Random(seed)
    rows: list[list[Any]] = []
    while len(rows) < len(polynomials) + _SPARE_ROWS:
        point = {name: random.randrange(2, 200) for name in variables}
        try:
            for k, name in enumerate(variables):
                row = [form[k].substitute(point) for form in forms]
                row += [entries[pair][name].substitute(point) for pair in pairs]
                rows.append([_number(value) for value in row])
        except ZeroDivisionError:
            rows = rows[: len(rows) // len(variables) * len(variables)]
    width = len(polynomials)
    reduced, rank = flint.fmpq_mat(len(rows), width + len(pairs), [v for r in rows for v in r]).rref()
    table = constants(reduced)
    pivots = [next(j for j, v in enumerate(row) if v) for row in table[:rank]]
    if any(pivot >= width for pivot in pivots):
        return None
    used = [k for k, pivot in enumerate(pivots) if any(table[k][width:])]
    coefficients = {pair: tuple(table[k][width + column] for k in used) for column, pair in enumerate(pairs)}
    return OddFit(tuple(polynomials[pivots[k]] for k in used), coefficients)


def _number(value: Rational) -> Any:
    number = value.to_fraction()
    return flint.fmpq(number.numerator, number.denominator)
