"""Parametric integrals that are products of Gamma functions, done one direction at a time.

``int prod_i dx_i x_i^(a_i - 1) prod_j P_j^(-lambda_j)`` over positive x, the P_j positive polynomials. If
along some ``x_i -> s^(v_i) x_i`` all P_j scale but one, ``P = s^l A + s^(l+k) B``, the integral over s is
Euler's,

``int ds/s s^alpha (A + s^k B)^-l = Gamma(g) Gamma(l - g) / (k Gamma(l)) A^(g - l) B^-g``

with g = alpha/k, and A and B, split into factors, stand in the integral over the remaining parameters. It
ends with Gamma functions where no parameter is left. For one polynomial whose terms are a simplex this is
Dirichlet's integral; loops done one after the other, massive vacuum integrals and integrals on shell are
other cases. All integrands are positive, so every step holds wherever the whole converges, and elsewhere by
analytic continuation in the exponents.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from itertools import product
from math import gcd, lcm
from typing import Any

import flint

from ibpred.exact.rational import Polynomial, Rational, Ring, ring

EpsLinear = tuple[Fraction, Fraction]
"""(a, b) for a + b eps."""

Terms = Mapping[tuple[int, ...], Rational]
"""Parameter monomial -> coefficient."""


@dataclass(frozen=True)
class GammaProduct:
    """``prefactor prod Gamma(numerator) / prod Gamma(denominator) prod scale^exponent``.

    Attributes
    ----------
    prefactor
        A positive rational number.
    numerator, denominator
        Arguments of the Gamma functions.
    scales
        (positive element of the ring of coefficients, exponent).
    """

    prefactor: Fraction
    numerator: tuple[EpsLinear, ...]
    denominator: tuple[EpsLinear, ...]
    scales: tuple[tuple[Rational, EpsLinear], ...]


def plus(*values: EpsLinear) -> EpsLinear:
    """The sum."""
    return sum((a for a, _ in values), Fraction(0)), sum((b for _, b in values), Fraction(0))


def times(value: EpsLinear, factor: Fraction | int) -> EpsLinear:
    """A multiple."""
    return value[0] * factor, value[1] * factor


def parametric_product(terms: Terms, exponent: EpsLinear, powers: Sequence[EpsLinear]) -> GammaProduct | None:
    """``int prod_i dx_i x_i^(a_i - 1) P^-exponent`` as a product of Gamma functions.

    Parameters
    ----------
    terms
        P: coefficients in one field, positive wherever its variables are positive.
    exponent
        Of 1/P.
    powers
        The a_i.

    Returns
    -------
    GammaProduct or None
        None where no order of directions is found, as for scaleless integrals. Arguments of Gamma functions
        may be poles; they are not cancelled.
    """
    field = next(iter(terms.values())).ring
    names = tuple(f"parameter{i}" for i in range(len(powers)))
    whole = ring((*field.names, *names))
    common = field.context.constant(1)
    for value in terms.values():
        common = common * (value.denominator / common.gcd(value.denominator))
    polynomial = whole.zero.numerator
    for exponents, value in terms.items():
        coefficient = field.fraction(value.numerator * common, value.denominator).to_ring(whole).numerator
        monomial = {(*(0,) * len(field.names), *exponents): 1}
        polynomial = polynomial + coefficient * whole.polynomial(monomial)
    search = _Search(field, whole, set())
    start = _State(tuple(range(len(powers))), tuple(powers), ())
    state, out = search.absorbed(start, [(polynomial, exponent)])
    scale = field.fraction(common, field.context.constant(1))
    found = search.integrated(state)
    if found is None:
        return None
    return _joined(_joined(GammaProduct(Fraction(1), (), (), ((scale, exponent),)), out), found)


def _joined(left: GammaProduct, right: GammaProduct) -> GammaProduct:
    return GammaProduct(
        left.prefactor * right.prefactor,
        left.numerator + right.numerator,
        left.denominator + right.denominator,
        left.scales + right.scales,
    )


@dataclass(frozen=True)
class _State:
    """What is left: live parameters, powers of all parameters, factors ``P^-lambda``."""

    live: tuple[int, ...]
    powers: tuple[EpsLinear, ...]
    factors: tuple[tuple[Polynomial, EpsLinear], ...]

    def key(self) -> tuple[tuple[int, ...], frozenset[str]]:
        return self.live, frozenset(str(p) for p, _ in self.factors)


@dataclass(frozen=True)
class _Search:
    """Depth-first search over directions; states from which there is no way are remembered."""

    field: Ring
    whole: Ring
    failed: set[tuple[tuple[int, ...], frozenset[str]]]

    def integrated(self, state: _State) -> GammaProduct | None:
        if not state.live:
            return GammaProduct(Fraction(1), (), (), ())
        if state.key() in self.failed:
            return None
        for j in range(len(state.factors)):
            for direction in self.directions(state, j):
                after, step = self.step(state, j, direction)
                rest = self.integrated(after)
                if rest is not None:
                    return _joined(step, rest)
        self.failed.add(state.key())
        return None

    def exponents(self, polynomial: Polynomial, live: Sequence[int]) -> list[tuple[int, ...]]:
        """Exponents in the live parameters, each once."""
        skip = len(self.field.names)
        return list({tuple(int(e[skip + i]) for i in live) for e in polynomial.monoms()})

    def directions(self, state: _State, j: int) -> Iterator[dict[int, int]]:
        """Integer v along which factor j splits into two parts and the others scale."""
        width = len(state.live)
        rows = []
        for h, (polynomial, _) in enumerate(state.factors):
            if h != j:
                first, *others = self.exponents(polynomial, state.live)
                rows += [[a - b for a, b in zip(other, first, strict=True)] for other in others]
        basis = _null_space(rows, width)
        points = self.exponents(state.factors[j][0], state.live)
        seen = [
            tuple(sum((a * b for a, b in zip(v, r, strict=True)), Fraction(0)) for v in basis) for r in points
        ]
        seen = sorted(set(seen))
        differences = [[a - b for a, b in zip(q, seen[0], strict=True)] for q in seen[1:]]
        corners = _independent(differences, len(basis))
        if not basis or corners is None:
            return  # no freedom, or a direction along which everything scales
        matrix = flint.fmpq_mat([[_fmpq(v) for v in row] for row in corners])
        inverse = matrix.inv()
        for levels in product((0, 1), repeat=len(basis)):
            if not any(levels):
                continue
            solution = inverse * flint.fmpq_mat(len(basis), 1, list(levels))
            weights = [Fraction(int(v.p), int(v.q)) for v in solution.entries()]
            heights = (
                sum((w * c for w, c in zip(weights, row, strict=True)), Fraction(0)) for row in differences
            )
            if all(height in (0, 1) for height in heights):
                total = [
                    sum((w * v[i] for w, v in zip(weights, basis, strict=True)), Fraction(0))
                    for i in range(width)
                ]
                yield {place: n for place, n in zip(state.live, _primitive(total), strict=True) if n}

    def step(self, state: _State, j: int, direction: Mapping[int, int]) -> tuple[_State, GammaProduct]:
        """Integrate over the scale of a direction, the parameter with the least component set to one."""
        place = min(direction, key=lambda i: (abs(direction[i]), i))
        live = tuple(i for i in state.live if i != place)
        alpha = plus(*(times(state.powers[i], n) for i, n in direction.items()))
        factors: list[tuple[Polynomial, EpsLinear]] = []
        split: dict[int, Polynomial] = {}
        for h, (polynomial, power) in enumerate(state.factors):
            parts = self.parts(polynomial, direction, place)
            if h == j:
                split = parts
            else:
                ((level, rest),) = parts.items()
                alpha = plus(alpha, times(power, -level))
                factors.append((rest, power))
        low, high = sorted(split)
        power = state.factors[j][1]
        g = times(plus(alpha, times(power, -low)), Fraction(1, high - low))
        other = plus(power, times(g, -1))
        factors += [(split[low], other), (split[high], g)]
        after, scales = self.absorbed(replace(state, live=live, factors=()), factors)
        factor = Fraction(abs(direction[place]), high - low)
        return after, _joined(GammaProduct(factor, (g, other), (power,), ()), scales)

    def parts(
        self, polynomial: Polynomial, direction: Mapping[int, int], place: int
    ) -> dict[int, Polynomial]:
        """The parts of a polynomial by their degree along a direction, one parameter set to one."""
        skip = len(self.field.names)
        found: dict[int, dict[tuple[int, ...], int]] = {}
        for exponents, coefficient in polynomial.to_dict().items():
            key = [int(e) for e in exponents]
            level = sum(key[skip + i] * n for i, n in direction.items())
            key[skip + place] = 0
            part = found.setdefault(level, {})
            part[tuple(key)] = part.get(tuple(key), 0) + int(coefficient)
        return {level: self.whole.polynomial(terms) for level, terms in found.items()}

    def absorbed(
        self, state: _State, new: Sequence[tuple[Polynomial, EpsLinear]]
    ) -> tuple[_State, GammaProduct]:
        """Split polynomials: monomials go to the powers, what is free of parameters to the scales."""
        skip = len(self.field.names)
        powers = list(state.powers)
        factors: dict[str, tuple[Polynomial, EpsLinear]] = {}
        scales: list[tuple[Rational, EpsLinear]] = []
        for polynomial, exponent in new:
            number, pieces = polynomial.factor()
            together = []
            for piece, multiplicity in pieces:
                used = [i - skip for i, degree in enumerate(piece.degrees()) if degree > 0 and i >= skip]
                if used and len(piece) > 1:
                    together.append((piece, int(multiplicity)))
                    continue
                if piece.leading_coefficient() < 0:
                    piece, number = -piece, number * (-1) ** int(multiplicity)
                total = times(exponent, -int(multiplicity))
                if used:
                    powers[used[0]] = plus(powers[used[0]], total)
                else:
                    scales.append((self.scale(piece), total))
            # factors with terms of both signs are positive only together: then all stay one polynomial
            mixed = self.whole.context.constant(1)
            split = all(len({int(c) > 0 for c in piece.coeffs()}) == 1 for piece, _ in together)
            for piece, multiplicity in together:
                if not split:
                    mixed = mixed * piece**multiplicity
                    continue
                if piece.leading_coefficient() < 0:
                    piece, number = -piece, number * (-1) ** multiplicity
                _add(factors, piece, times(exponent, multiplicity))
            if number < 0:
                mixed, number = -mixed, -number
            if not mixed.is_constant():
                _add(factors, mixed, exponent)
            scales.append((self.field.constant(int(number)), times(exponent, -1)))
        kept = tuple(item for item in factors.values() if any(item[1]))
        return _State(state.live, tuple(powers), kept), GammaProduct(Fraction(1), (), (), tuple(scales))

    def scale(self, polynomial: Polynomial) -> Rational:
        """A polynomial free of parameters over the ring of coefficients."""
        return self.whole.fraction(polynomial, self.whole.context.constant(1)).to_ring(self.field)


def _add(factors: dict[str, tuple[Polynomial, EpsLinear]], piece: Polynomial, exponent: EpsLinear) -> None:
    _, before = factors.get(str(piece), (piece, (Fraction(0), Fraction(0))))
    factors[str(piece)] = (piece, plus(before, exponent))


def _fmpq(value: Fraction) -> Any:
    return flint.fmpq(value.numerator, value.denominator)


def _null_space(rows: Sequence[Sequence[int]], width: int) -> list[list[Fraction]]:
    """Basis of the vectors orthogonal to all rows."""
    if not rows:
        return [[Fraction(int(i == j)) for j in range(width)] for i in range(width)]
    reduced, rank = flint.fmpq_mat([list(row) for row in rows]).rref()
    pivots = [next(c for c in range(width) if reduced[r, c] != 0) for r in range(rank)]
    found = []
    for free in (c for c in range(width) if c not in pivots):
        vector = [Fraction(0)] * width
        vector[free] = Fraction(1)
        for r, pivot in enumerate(pivots):
            vector[pivot] = -Fraction(int(reduced[r, free].p), int(reduced[r, free].q))
        found.append(vector)
    return found


def _independent(rows: Sequence[Sequence[Fraction]], wanted: int) -> list[Sequence[Fraction]] | None:
    """The first rows that are linearly independent; None where there are fewer than wanted."""
    if len(rows) < wanted or not rows:
        return None
    columns = flint.fmpq_mat([[_fmpq(row[i]) for row in rows] for i in range(len(rows[0]))])
    reduced, rank = columns.rref()
    if rank < wanted:
        return None
    pivots = [next(c for c in range(len(rows)) if reduced[r, c] != 0) for r in range(rank)]
    return [rows[c] for c in pivots]


def _primitive(vector: Sequence[Fraction]) -> list[int]:
    """The shortest integer multiple."""
    common = lcm(*(v.denominator for v in vector))
    whole = [int(v * common) for v in vector]
    size = gcd(*whole)
    return [v // size for v in whole]
