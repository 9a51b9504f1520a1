"""The graph polynomials U and F (Symanzik polynomials) of a family, by determinants.

With ``sum_i x_i D_i = -(k^T M k + 2 Q.k) + J`` the parametric representation holds

``U = det M``,  ``F = U (J + Q^T M^-1 Q)``,

so that for lines ``D = m2 - q^2`` both are sums of positive monomials in the Euclidean region
(N. Nakanishi, Graph Theory and Feynman Integrals, 1971; C. Bogner, S. Weinzierl, arXiv:1002.3458). M, Q and
J are linear in the parameters, so a subsector's U and F follow by setting the missing x_i to zero.

None of this asks for lines that are squares. A line linear in the loop momenta (``-2*k*v - w``) has no part
in M, so its parameter is missing from U and occurs in F only; U + F still decides which sectors are
scaleless and which are equal. Where U vanishes identically, some combination of loop momenta occurs in scalar
products with external momenta alone: its components orthogonal to those have no scale, and the sector
vanishes.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import reduce
from typing import Any

import flint

from ibpred.errors import InputError
from ibpred.exact.rational import Polynomial, Rational, Ring
from ibpred.family.definition import FamilyDefinition

Exponents = tuple[int, ...]


@dataclass(frozen=True)
class ParameterPolynomial:
    """A polynomial in the Feynman parameters of all lines of a family.

    Attributes
    ----------
    ring
        The kinematic ring: Q(invariants).
    lines
        Number of parameters (lines of the family, numerators included).
    terms
        Nonzero coefficients by exponents; one exponent for each line of the family.
    """

    ring: Ring
    lines: int
    terms: Mapping[Exponents, Rational]

    def __bool__(self) -> bool:
        return bool(self.terms)

    def restrict(self, sector: int) -> ParameterPolynomial:
        """Set the parameters of all lines outside the sector (a bit mask) to zero."""
        outside = [i for i in range(self.lines) if not sector >> i & 1]
        kept = {e: v for e, v in self.terms.items() if not any(e[i] for i in outside)}
        return ParameterPolynomial(self.ring, self.lines, kept)

    def text(self) -> str:
        """Infix text with parameters ``x1, x2, ...`` numbered as the lines of the file."""
        parts = []
        for exponents in sorted(self.terms, reverse=True):
            value = self.terms[exponents]
            monomial = "*".join(
                f"x{i + 1}" if e == 1 else f"x{i + 1}^{e}" for i, e in enumerate(exponents) if e
            )
            if not monomial:
                parts.append(f"({value})")
            elif value.is_one():
                parts.append(monomial)
            elif (-value).is_one():
                parts.append(f"-{monomial}")
            elif len(value.numerator) > 1:
                parts.append(f"({value})*{monomial}")
            else:
                parts.append(f"{value}*{monomial}")
        return "+".join(parts).replace("+-", "-") or "0"


def symanzik(family: FamilyDefinition) -> tuple[ParameterPolynomial, ParameterPolynomial]:
    """U and F of the sector of all propagators; restrict them for subsectors.

    Returns
    -------
    (U, F)
        Over the parameters of all lines; those of numerators do not occur.
    """
    propagators = family.propagators
    count = len(family.loops)
    context = flint.fmpq_mpoly_ctx.get([f"x{i + 1}" for i in propagators], "degrevlex")
    x = context.gens()
    zero = context.constant(0)

    def total(coefficients: Sequence[Any]) -> Polynomial:
        return sum((g * _fmpq(c) for g, c in zip(x, coefficients, strict=True) if c), start=zero)

    lines = [family.lines[i] for i in propagators]
    m = [[total([-line.quadratic[i][j] for line in lines]) for j in range(count)] for i in range(count)]
    q = [
        [total([-line.linear[i][e] / 2 for line in lines]) for e in range(len(family.external))]
        for i in range(count)
    ]
    u = _determinant(m, context)
    parts: list[tuple[Polynomial, Rational]] = []  # F = sum of parameter polynomial * constant
    for generator, line in zip(x, lines, strict=True):
        if line.constant:
            parts.append((u * generator, line.constant))
    adjugate = _adjugate(m, context)
    for e in range(len(family.external)):
        for f in range(e + 1):
            if not family.gram[e][f]:
                continue
            quadratic = zero
            for i in range(count):
                for j in range(count):
                    quadratic += q[i][e] * adjugate[i][j] * q[j][f] * (1 if e == f else 2)
            if not quadratic.is_zero():
                parts.append((quadratic, family.gram[e][f]))
    ring_ = family.kinematic_ring
    place = _placement(propagators, len(family.lines))
    first = {place(e): ring_.constant(c) for e, c in u.to_dict().items()}
    second = {place(e): c for e, c in _collect(parts, ring_).items()}
    total_lines = len(family.lines)
    return (
        ParameterPolynomial(ring_, total_lines, first),
        ParameterPolynomial(ring_, total_lines, second),
    )


def first_symanzik(family: FamilyDefinition, sector: int) -> ParameterPolynomial:
    """U of one sector, a bit mask of propagators. For many sectors restrict `symanzik` instead.

    Raises
    ------
    InputError
        If the sector holds a numerator or a line that the family does not have.
    """
    _require_propagators(family, sector)
    return symanzik(family)[0].restrict(sector)


def second_symanzik(family: FamilyDefinition, sector: int) -> ParameterPolynomial:
    """F of one sector, a bit mask of propagators. For many sectors restrict `symanzik` instead.

    Raises
    ------
    InputError
        If the sector holds a numerator or a line that the family does not have.
    """
    _require_propagators(family, sector)
    return symanzik(family)[1].restrict(sector)


def _require_propagators(family: FamilyDefinition, sector: int) -> None:
    allowed = sum(1 << i for i in family.propagators)
    if sector & ~allowed or sector < 0:
        raise InputError(f"sector {sector} of {family.name} holds lines that are no propagators")


def _placement(propagators: tuple[int, ...], total: int) -> Any:
    def place(exponents: Sequence[Any]) -> Exponents:
        full = [0] * total
        for i, e in zip(propagators, exponents, strict=True):
            full[i] = int(e)
        return tuple(full)

    return place


def _fmpq(value: Any) -> Any:
    return flint.fmpq(value.numerator, value.denominator)


def _collect(parts: Sequence[tuple[Polynomial, Rational]], ring_: Ring) -> dict[Exponents, Rational]:
    """Sum of products, expanded over the monomials of the constants to stay with polynomials."""
    common = reduce(_lcm, (c.denominator for _, c in parts), ring_.context.constant(1))
    by_monomial: dict[Exponents, Polynomial] = {}
    for polynomial, constant in parts:
        numerator = constant.numerator * (common / constant.denominator)
        for monomial, coefficient in numerator.to_dict().items():
            key = tuple(int(e) for e in monomial)
            term = polynomial * flint.fmpq(int(coefficient))
            by_monomial[key] = by_monomial[key] + term if key in by_monomial else term
    coefficients: dict[Exponents, dict[Exponents, Any]] = {}
    for monomial, polynomial in by_monomial.items():
        for exponents, value in polynomial.to_dict().items():
            coefficients.setdefault(exponents, {})[monomial] = value
    result = {}
    for exponents, by_power in coefficients.items():
        scale = reduce(lambda n, v: int(flint.fmpz(n).lcm(v.q)), by_power.values(), 1)
        numerator = ring_.context.from_dict({k: int(v.p) * (scale // int(v.q)) for k, v in by_power.items()})
        result[exponents] = ring_.fraction(numerator, common * scale)
    return result


def _lcm(a: Polynomial, b: Polynomial) -> Polynomial:
    return a * b / a.gcd(b)


def _determinant(matrix: Sequence[Sequence[Polynomial]], context: Any) -> Polynomial:
    """Determinant by expansion along the first row (matrices are at most loops x loops)."""
    if not matrix:
        return context.constant(1)
    total = context.constant(0)
    for j, entry in enumerate(matrix[0]):
        if entry.is_zero():
            continue
        minor = [[*row[:j], *row[j + 1 :]] for row in matrix[1:]]
        total += entry * _determinant(minor, context) * (-1) ** j
    return total


def _adjugate(matrix: Sequence[Sequence[Polynomial]], context: Any) -> list[list[Polynomial]]:
    """The adjugate of a symmetric matrix."""
    size = len(matrix)
    result = [[context.constant(0)] * size for _ in range(size)]
    for i in range(size):
        for j in range(i + 1):
            minor = [[*row[:j], *row[j + 1 :]] for k, row in enumerate(matrix) if k != i]
            result[i][j] = result[j][i] = _determinant(minor, context) * (-1) ** (i + j)
    return result
