"""Factors of order two and more of a differential operator, by exponential solutions of exterior powers.

If M, of order r, divides L on the right and y_1, ..., y_r are its solutions, the minors
``W_I = det(y_j^(i), i in I)`` of the matrix of their derivatives solve the r-th exterior power of the system
of L, and up to a common factor they are rational (Beke; see van Hoeij, J. Symb. Comput. 24 (1997) 537). At a
singular point a the common factor behaves like ``(x-a)^sigma`` with sigma a sum of r exponents of L, so

    W_I = prod_a (x-a)^(sigma_a - |I|) P_I,     |I| the sum of the indices,

with polynomials P_I whose degrees the exponents at infinity bound. For each class of sigma modulo integers
the P_I follow from linear equations, and a solution whose minors are those of a matrix gives M.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import combinations, product
from math import prod
from typing import Any

import flint

from ibpred.epsform.obstructions.operators import (
    LocalExponents,
    Operator,
    adjoint,
    exponential_solution,
    operator,
    right_quotient,
    singular_points,
)
from ibpred.epsform.places import coefficients
from ibpred.exact.rational import Rational

_MOST_CLASSES = 200
_MOST_UNKNOWNS = 900

Indices = tuple[int, ...]
RationalPolynomial = Any  # flint.fmpq_poly
Minors = Mapping[Indices, RationalPolynomial]


@dataclass(frozen=True)
class Search:
    """Outcome of a search for right factors of one order.

    Attributes
    ----------
    found
        A right factor, None where none was found.
    complete
        Whether there is none where none was found.
    """

    found: Operator | None
    complete: bool


def factors(equation: Operator) -> tuple[Operator, ...]:
    """Factors over Q(x), the leftmost first, as far as they are found; see `is_irreducible`.

    Their product is the operator up to a function on the left.
    """
    found: list[Operator] = []
    while (last := _last_factor(equation)) is not None:
        found.insert(0, last)
        equation = right_quotient(equation, last)
    return (equation, *found)


def _last_factor(equation: Operator) -> Operator | None:
    """A right factor that has none itself."""
    if equation.order <= 1:
        return None
    found = _some_right_factor(equation)
    if found is None:
        return None
    further = _last_factor(found)
    return found if further is None else further


def _some_right_factor(equation: Operator) -> Operator | None:
    log = exponential_solution(equation)
    if log is not None:
        return operator([-log, log.ring.one], equation.name)
    for order in range(2, equation.order // 2 + 1):
        found = right_factor(equation, order).found
        if found is not None:
            return found
    if equation.order <= 2:
        return None
    # for monic operators L* = M N means L = N* M* (up to signs): M* divides L on the right
    dual = _dual(equation)
    log = exponential_solution(dual)
    divisor = None if log is None else operator([-log, log.ring.one], equation.name)
    for order in range(2, (equation.order + 1) // 2):
        if divisor is None:
            divisor = right_factor(dual, order).found
    if divisor is None:
        return None
    return _dual(right_quotient(dual, Operator(divisor.monic(), equation.name)))


def _dual(equation: Operator) -> Operator:
    """The adjoint of the operator made monic."""
    return adjoint(Operator(equation.monic(), equation.name))


def is_irreducible(equation: Operator) -> bool:
    """Whether an operator has provably no factor over Q(x), by searches that are complete.

    False also where it is not known: for operators that are not Fuchsian or have exponents that are not
    rational.
    """
    for order in range(1, equation.order // 2 + 1):
        for side in (equation, _dual(equation)):
            search = right_factor(side, order)
            if search.found is not None or not search.complete:
                return False
    return True


def right_factor(equation: Operator, order: int) -> Search:
    """Search for a right factor of a given order.

    Parameters
    ----------
    equation
        The operator.
    order
        At least one, and less than that of the operator.

    Returns
    -------
    outcome
        Incomplete for operators that are not Fuchsian or have exponents that are not rational, where the
        equations would be too many, or where a space of three or more solutions holds no factor that is
        seen at once.
    """
    points = singular_points(equation)
    if not all(p.regular and len(p.exponents) == equation.order for p in points):
        return Search(None, False)
    finite = [p for p in points if p.place is not None]
    (infinity,) = (p for p in points if p.place is None)
    choices = [_sums(p, order) for p in (*finite, infinity)]
    if prod(map(len, choices)) > _MOST_CLASSES:
        return Search(None, False)
    power = _ExteriorPower(equation, order, finite)
    complete = True
    for classes in product(*choices):
        basis = power.solutions([c[0] for c in classes])
        if basis is not None and len(basis) <= 2:
            found = power.first_factor(basis)
        else:
            # a factor lies in the smaller spaces of its own exponents
            complete = False
            found = _in_smaller_space(power, classes)
        if found is not None:
            return Search(found, True)
    return Search(None, complete)


def _in_smaller_space(power: _ExteriorPower, classes: Sequence[Sequence[Fraction]]) -> Operator | None:
    if prod(map(len, classes)) > _MOST_CLASSES:
        return None
    for sums in product(*classes):
        basis = power.solutions(sums)
        if basis is not None and len(basis) <= 2:
            found = power.first_factor(basis)
            if found is not None:
                return found
    return None


def _sums(point: LocalExponents, order: int) -> list[list[Fraction]]:
    """The sums of so many exponents by classes modulo integers, ascending."""
    classes: dict[Fraction, set[Fraction]] = {}
    for chosen in combinations(point.exponents, order):
        total = sum(chosen, Fraction(0))
        classes.setdefault(total - total.__floor__(), set()).add(total)
    return [sorted(found) for _, found in sorted(classes.items())]


class _ExteriorPower:
    """The system of the minors of r solutions of an operator of order n."""

    def __init__(self, equation: Operator, order: int, finite: Sequence[LocalExponents]) -> None:
        self.equation, self.order = equation, order
        self.sets = list(combinations(range(equation.order), order))
        name = equation.name
        self.places = [p.place for p in finite if p.place is not None]
        self.slopes = [_polynomial(place.element.derivative(name), name) for place in self.places]
        self.local = [_polynomial(place.element, name) for place in self.places]
        self.singular = prod(self.local, start=flint.fmpq_poly([1]))
        # coefficients of y^(n) = - sum_k ..., times powers of the product of the singular places
        monic = equation.monic()
        below = prod((place.element for place in self.places), start=equation.ring.one)
        self.lower = [_polynomial(c * below ** (equation.order - k), name) for k, c in enumerate(monic[:-1])]

    def solutions(self, exponents: Sequence[Fraction]) -> list[Minors] | None:
        """The polynomials P_I of all solutions whose common factor has these exponents; None if too many.

        The exponents at infinity come last.
        """
        *sums, infinity = exponents
        degrees = [place.degree for place in self.places]
        start = -infinity - sum(s * d for s, d in zip(sums, degrees, strict=True))
        growth = sum(degrees) - 1
        if start.denominator != 1:
            return []
        sizes = {i: max(int(start) + growth * sum(i) + 1, 0) for i in self.sets}
        if sum(sizes.values()) > _MOST_UNKNOWNS:
            return None
        return self._null_space(sums, sizes)

    def _null_space(self, sums: Sequence[Fraction], sizes: Mapping[Indices, int]) -> list[Minors]:
        x = flint.fmpq_poly([0, 1])
        log = sum(
            (
                _number(s) * slope * (self.singular // local)
                for s, slope, local in zip(sums, self.slopes, self.local, strict=True)
            ),
            flint.fmpq_poly([0]),
        )
        columns: list[dict[tuple[Indices, int], Any]] = []
        into = self._couplings()
        for own in self.sets:
            diagonal = log - self.singular.derivative() * sum(own)
            for power in range(sizes[own]):
                monomial = x**power
                entry = {own: self.singular * monomial.derivative() + diagonal * monomial}
                for target, factor in into[own]:
                    entry[target] = entry.get(target, flint.fmpq_poly([0])) - factor * monomial
                columns.append(
                    {(i, k): c for i, value in entry.items() for k, c in enumerate(value.coeffs()) if c}
                )
        keys = sorted({key for column in columns for key in column})
        rows = {key: number for number, key in enumerate(keys)}
        matrix = flint.fmpq_mat(len(rows), len(columns))
        for j, column in enumerate(columns):
            for key, value in column.items():
                matrix[rows[key], j] = value
        found: list[Minors] = []
        for vector in _kernel(matrix):
            source = iter(vector)
            found.append({i: flint.fmpq_poly([next(source) for _ in range(sizes[i])]) for i in self.sets})
        return found

    def _couplings(self) -> dict[Indices, list[tuple[Indices, RationalPolynomial]]]:
        """For each minor the equations in which it stands on the right, with its factor."""
        into: dict[Indices, list[tuple[Indices, RationalPolynomial]]] = {i: [] for i in self.sets}
        one, last = flint.fmpq_poly([1]), self.equation.order - 1
        for own in self.sets:
            for k, index in enumerate(own):
                if index < last and index + 1 not in own:
                    into[(*own[:k], index + 1, *own[k + 1 :])].append((own, one))
            if own[-1] == last:
                for index, factor in enumerate(self.lower):
                    if index not in own[:-1] and factor:
                        place = sum(i < index for i in own[:-1])
                        sign = -1 if (len(own) - 1 - place) % 2 == 0 else 1
                        into[tuple(sorted((*own[:-1], index)))].append((own, factor * sign))
        return into

    def first_factor(self, basis: Sequence[Minors]) -> Operator | None:
        """A factor whose minors are in a space of two dimensions at most."""
        candidates = list(basis)
        if len(basis) == 2 and 1 < self.order < self.equation.order - 1:
            candidates += self._decomposable(*basis)
        return next((found for minors in candidates if (found := self._factor(minors)) is not None), None)

    def _decomposable(self, first: Minors, second: Minors) -> list[Minors]:
        """Combinations of two solutions that satisfy the quadratic relations of minors (Plücker)."""
        n, r = self.equation.order, self.order

        def entry(minors: Minors, indices: Indices) -> RationalPolynomial:
            ordered = tuple(sorted(indices))
            swaps = sum(a > b for k, a in enumerate(indices) for b in indices[k + 1 :])
            return minors[ordered] * (-1) ** swaps

        for shared in combinations(range(n), r - 2):
            rest = [i for i in range(n) if i not in shared]
            for a, b, c, d in combinations(rest, 4):
                pairs = ((a, b), (c, d), 1), ((a, c), (b, d), -1), ((a, d), (b, c), 1)
                parts = [flint.fmpq_poly([0])] * 3
                for left, right, sign in pairs:
                    u = [entry(m, (*shared, *left)) * sign for m in (first, second)]
                    v = [entry(m, (*shared, *right)) for m in (first, second)]
                    parts[0] += u[0] * v[0]
                    parts[1] += u[0] * v[1] + u[1] * v[0]
                    parts[2] += u[1] * v[1]
                power = max(p.degree() for p in parts)
                if power < 0:
                    continue
                ratios = _rational_roots([p[power] for p in parts])
                return [{i: first[i] + second[i] * ratio for i in self.sets} for ratio in ratios]
        return []

    def _factor(self, minors: Minors) -> Operator | None:
        """The operator whose solutions have these minors, if it divides."""
        r, name = self.order, self.equation.name
        ring, first = self.equation.ring, tuple(range(r))
        if not minors[first]:
            return None
        below = prod((place.element for place in self.places), start=ring.one)
        head = _element(minors[first], ring.variable(name))
        values = []
        for k in range(r):
            own = tuple(i for i in range(r + 1) if i != k)
            values.append(
                _element(minors[own], ring.variable(name)) * (-1) ** (r - k) / (head * below ** (r - k))
            )
        found = operator([*values, ring.one], name)
        try:
            right_quotient(self.equation, found)
        except ArithmeticError:
            return None
        return found


def _rational_roots(values: Sequence[Any]) -> list[Any]:
    """Rational zeros of a polynomial given by its coefficients, lowest first."""
    return [
        -factor[0] / factor[1]
        for factor, _ in flint.fmpq_poly(list(values)).factor()[1]
        if factor.degree() == 1
    ]


def _kernel(matrix: Any) -> list[list[Any]]:
    """A basis of the null space over Q."""
    reduced, rank = matrix.rref()
    width = matrix.ncols()
    rows = reduced.tolist()[:rank]
    pivots = [next(j for j, v in enumerate(row) if v) for row in rows]
    found = []
    for free in sorted(set(range(width)) - set(pivots)):
        vector = [flint.fmpq(int(j == free)) for j in range(width)]
        for row, pivot in zip(rows, pivots, strict=True):
            vector[pivot] = -row[free]
        found.append(vector)
    return found


def _number(value: Fraction) -> Any:
    return flint.fmpq(value.numerator, value.denominator)


def _polynomial(value: Rational, name: str) -> RationalPolynomial:
    """A polynomial in one variable.

    Raises
    ------
    ArithmeticError
        If it is no polynomial.
    """
    if not value.is_polynomial():
        raise ArithmeticError(f"{value} is no polynomial: the operator is not Fuchsian")
    parts = coefficients(value.numerator, value.ring, name)
    scale = value.denominator.leading_coefficient()
    top = max(parts, default=0)
    numbers = [_number(parts[k].to_fraction()) if k in parts else flint.fmpq(0) for k in range(top + 1)]
    return flint.fmpq_poly(numbers) / int(scale)


def _element(value: RationalPolynomial, x: Rational) -> Rational:
    """A polynomial as an element of the field of x."""
    numbers = [Fraction(int(c.p), int(c.q)) for c in value.coeffs()]
    total = x.ring.zero
    for number in reversed(numbers):
        total = total * x + number
    return total
