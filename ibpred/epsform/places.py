"""The places of the field Q(eps)(x): irreducible polynomials, and infinity.

Elements of the residue field at an irreducible q of degree n in x are tuples of n elements of Q(eps):
the coefficients of 1, x, ..., x^(n-1).
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from fractions import Fraction

from ibpred.epsform.matrices import solve
from ibpred.exact.polynomial import irreducible_factors
from ibpred.exact.rational import Polynomial, Rational, Ring, polynomial_text

Residue = tuple[Rational, ...]
"""An element of the residue field at a finite place."""


def coefficients(polynomial: Polynomial, ring: Ring, name: str) -> dict[int, Rational]:
    """Coefficients by powers of one variable, as elements of the ring."""
    index = ring.index(name)
    parts: dict[int, dict[tuple[int, ...], int]] = {}
    for exponents, coefficient in polynomial.to_dict().items():
        rest = [int(e) for e in exponents]
        power, rest[index] = rest[index], 0
        parts.setdefault(power, {})[tuple(rest)] = coefficient
    return {
        power: ring.fraction(ring.context.from_dict(terms), ring.context.constant(1))
        for power, terms in parts.items()
    }


def degree(polynomial: Polynomial, ring: Ring, name: str) -> int:
    """Degree in one variable."""
    return int(polynomial.degrees()[ring.index(name)])


def growth(value: Rational, name: str) -> int:
    """Degree of numerator minus degree of denominator in one variable (of a nonzero element)."""
    return degree(value.numerator, value.ring, name) - degree(value.denominator, value.ring, name)


def leading(value: Rational, name: str) -> Rational:
    """Coefficient of ``x^growth`` in the expansion at infinity."""
    top = coefficients(value.numerator, value.ring, name)
    bottom = coefficients(value.denominator, value.ring, name)
    return top[max(top)] / bottom[max(bottom)]


@dataclass(frozen=True)
class Place:
    """A finite singular place.

    Attributes
    ----------
    polynomial
        Irreducible over Q, primitive, with positive leading coefficient; depends on `name`.
    ring, name
        The ring it lives in, and the variable x.
    monic
        Coefficients of 1, x, ..., x^(degree-1) of the polynomial made monic in x.
    """

    polynomial: Polynomial
    ring: Ring
    name: str
    monic: Residue

    @property
    def degree(self) -> int:
        return len(self.monic)

    @property
    def moves(self) -> bool:
        """Whether the place depends on eps."""
        return degree(self.polynomial, self.ring, "eps") > 0

    @property
    def root(self) -> Fraction | None:
        """The point, where it is a rational number."""
        if self.degree == 1 and self.monic[0].is_constant():
            return -self.monic[0].to_fraction()
        return None

    @property
    def element(self) -> Rational:
        """The polynomial as an element of the field."""
        return Rational(self.ring, self.polynomial, self.ring.context.constant(1))

    def logarithmic(self) -> Rational:
        """``dlog(polynomial)/dx``."""
        top = self.polynomial.derivative(self.ring.index(self.name))
        return self.ring.fraction(top, self.polynomial)

    def text(self) -> str:
        """The place for messages, e.g. ``x = 4`` or ``x^2+1 = 0``."""
        root = self.root
        if root is not None:
            return f"{self.name} = {root}"
        return f"{polynomial_text(self.polynomial)} = 0"

    def order(self, polynomial: Polynomial) -> tuple[int, Polynomial]:
        """Multiplicity in a polynomial, and what is left of it."""
        count = 0
        while True:
            quotient, rest = divmod(polynomial, self.polynomial)
            if not rest.is_zero():
                return count, polynomial
            polynomial, count = quotient, count + 1

    def reduce(self, polynomial: Polynomial) -> Residue:
        """A polynomial modulo the place."""
        parts = coefficients(polynomial, self.ring, self.name)
        top = max(parts, default=0)
        zero = self.ring.zero
        if self.degree == 1:
            root, total = -self.monic[0], zero
            for power in range(top, -1, -1):
                total = total * root + parts[power] if power in parts else total * root
            return (total,)
        rest = [parts.get(power, zero) for power in range(max(top + 1, self.degree))]
        for power in range(len(rest) - 1, self.degree - 1, -1):
            head = rest[power]
            if head:
                for i, c in enumerate(self.monic):
                    rest[power - self.degree + i] = rest[power - self.degree + i] - head * c
        return tuple(rest[: self.degree])

    def multiply(self, left: Residue, right: Residue) -> Residue:
        """Product in the residue field."""
        if self.degree == 1:
            return (left[0] * right[0],)
        columns = self._multiples(right)
        return tuple(
            sum((a * column[i] for a, column in zip(left, columns, strict=True) if a), self.ring.zero)
            for i in range(self.degree)
        )

    def divide(self, left: Residue, right: Residue) -> Residue:
        """Quotient in the residue field."""
        if self.degree == 1:
            return (left[0] / right[0],)
        columns = self._multiples(right)
        matrix = tuple(zip(*columns, strict=True))
        return tuple(row[0] for row in solve(matrix, tuple((a,) for a in left), self.ring))

    def _multiples(self, value: Residue) -> tuple[Residue, ...]:
        """``x^k value`` for k below the degree."""
        found = [value]
        for _ in range(self.degree - 1):
            last = found[-1]
            shifted = (self.ring.zero, *last[:-1])
            found.append(tuple(s - last[-1] * c for s, c in zip(shifted, self.monic, strict=True)))
        return tuple(found)

    def principal(self, value: Rational, order: int) -> Residue:
        """``value * polynomial^order`` at the place; zero if the pole is of lower order."""
        have, rest = self.order(value.denominator)
        if have < order:
            return (self.ring.zero,) * self.degree
        return self.divide(self.reduce(value.numerator), self.reduce(rest))

    def slope(self) -> Residue:
        """Derivative of the polynomial in x, at the place."""
        return self.reduce(self.polynomial.derivative(self.ring.index(self.name)))

    def lift(self, value: Residue) -> Rational:
        """The polynomial of lowest degree with the given residue."""
        x, total = self.ring.variable(self.name), self.ring.zero
        for c in reversed(value):
            total = total * x + c
        return total


def positive(polynomial: Polynomial) -> Polynomial:
    """The polynomial or its negative: that with a positive leading coefficient."""
    return polynomial if polynomial.leading_coefficient() > 0 else -polynomial


def place(polynomial: Polynomial, ring: Ring, name: str) -> Place:
    """The place of an irreducible polynomial that depends on `name`."""
    parts = coefficients(polynomial, ring, name)
    top = max(parts)
    monic = tuple(parts.get(i, ring.zero) / parts[top] for i in range(top))
    return Place(polynomial, ring, name, monic)


def places_of(values: Iterable[Rational], ring: Ring, name: str) -> tuple[Place, ...]:
    """The finite poles in x of some elements, in a canonical order: fixed first, by degree, by text."""
    found: dict[str, Polynomial] = {}
    index = ring.index(name)
    seen: set[str] = set()
    for value in values:
        denominator = value.denominator
        if denominator.degrees()[index] == 0 or (key := str(denominator)) in seen:
            continue
        seen.add(key)
        _, factors = irreducible_factors(denominator)
        for factor, _ in factors:
            if factor.degrees()[index] > 0:
                normal = positive(factor)
                found[str(normal)] = normal
    all_places = [place(polynomial, ring, name) for polynomial in found.values()]
    return tuple(sorted(all_places, key=_rank))


def _rank(item: Place) -> tuple[bool, int, bool, Fraction, str]:
    """Order of the letters: rational points by size with zero first, then the rest."""
    root = item.root
    size = Fraction(0) if root is None else abs(root)
    return item.moves, item.degree, root is None, size, item.text()


_SPECIAL = 40
"""Points at which the other ratios are tried."""


def constant_residue(value: Rational, pole: Place) -> Rational | None:
    """Residue at a simple pole, if it is the same at all conjugate points and for all other ratios.

    It is read off at one point of the other ratios, where ``numerator = residue * rest * q'`` modulo q needs
    no division; whether it is the residue everywhere is for the caller to check.

    Returns
    -------
    residue or None
        An element that depends on eps alone; None where conjugate points have different ones.
    """
    ring, name = pole.ring, pole.name
    _, rest = pole.order(value.denominator)
    others = [n for n in ring.names if n not in ("eps", name)]
    slope = pole.polynomial.derivative(ring.index(name))
    for k in range(_SPECIAL):
        point = {n: 3 + 7 * k + 11 * (i + 1) ** 2 for i, n in enumerate(others)}

        def at(polynomial: Polynomial, point: dict[str, int] = point) -> Rational:
            return _element(polynomial, ring).substitute(point)

        special = at(pole.polynomial)
        if degree(special.numerator, ring, name) != pole.degree:
            continue
        # it may be reducible, but there is nothing to divide by
        here = place(special.numerator, ring, name)
        above = here.reduce(at(value.numerator).numerator)
        below = here.reduce(at(rest).numerator * at(slope).numerator)
        first = next((i for i, entry in enumerate(below) if entry), None)
        if first is None:
            continue
        if any(a * below[first] != b * above[first] for a, b in zip(above, below, strict=True)):
            return None
        return above[first] / below[first]
    return None


def _element(polynomial: Polynomial, ring: Ring) -> Rational:
    return Rational(ring, polynomial, ring.context.constant(1))
