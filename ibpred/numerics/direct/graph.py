"""U and F of a family at a numeric point, in the parameters of all lines, numerators included."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from itertools import permutations

from ibpred.errors import PointError
from ibpred.exact.rational import Rational
from ibpred.family.definition import FamilyDefinition
from ibpred.numerics.direct.polynomial import Exponents

_Poly = dict[Exponents, Fraction]


def graph_polynomials(
    family: FamilyDefinition, point: Mapping[str, Fraction | int]
) -> tuple[dict[Exponents, float], dict[Exponents, float]]:
    """U and F with numbers for the invariants.

    With ``sum_i x_i D_i = -(k.M k + 2 Q.k) + J``: ``U = det M``, ``F = U J + Q adj(M) Q``
    (N. Nakanishi, Graph Theory and Feynman Integrals, 1971).

    Parameters
    ----------
    point
        Value of every invariant.

    Returns
    -------
    U, F
        Exponents of the parameters of all lines to coefficients.

    Raises
    ------
    PointError
        If an invariant has no value, or a value belongs to no invariant.
    """
    names = set(family.kinematic_ring.names)
    for wrong in sorted(names ^ set(point)):
        what = "has no value" if wrong in names else "is no invariant of the family"
        raise PointError(f"{wrong} {what}; the invariants are {', '.join(sorted(names)) or 'none'}")
    values = {name: Fraction(value) for name, value in point.items()}

    def number(value: Rational) -> Fraction:
        return value.substitute(values).to_fraction()

    loops, external, n = len(family.loops), len(family.external), len(family.lines)
    unit = [tuple(int(i == k) for i in range(n)) for k in range(n)]

    def total(coefficients: Sequence[Fraction]) -> _Poly:
        return {e: c for e, c in zip(unit, coefficients, strict=True) if c}

    m = [
        [total([-line.quadratic[i][j] for line in family.lines]) for j in range(loops)] for i in range(loops)
    ]
    q = [
        [total([-line.linear[i][e] / 2 for line in family.lines]) for e in range(external)]
        for i in range(loops)
    ]
    u = _determinant(m, n)
    f = _product(u, total([number(line.constant) for line in family.lines]))
    for i in range(loops):
        for j in range(loops):
            minor = [[m[r][c] for c in range(loops) if c != i] for r in range(loops) if r != j]
            cofactor = _times(_determinant(minor, n), Fraction((-1) ** (i + j)))
            for a in range(external):
                for b in range(external):
                    gram = number(family.gram[a][b])
                    if gram:
                        f = _sum(f, _times(_product(_product(q[i][a], cofactor), q[j][b]), gram))
    return {e: float(c) for e, c in u.items()}, {e: float(c) for e, c in f.items()}


def _determinant(matrix: list[list[_Poly]], n: int) -> _Poly:
    """Leibniz' sum: a handful of loops at most."""
    size = len(matrix)
    total: _Poly = {}
    for order in permutations(range(size)):
        swaps = sum(order[i] > order[j] for i in range(size) for j in range(i + 1, size))
        term: _Poly = {(0,) * n: Fraction((-1) ** swaps)}
        for i, j in enumerate(order):
            term = _product(term, matrix[i][j])
        total = _sum(total, term)
    return total


def _product(a: _Poly, b: _Poly) -> _Poly:
    total: _Poly = {}
    for e, c in a.items():
        for g, h in b.items():
            key = tuple(x + y for x, y in zip(e, g, strict=True))
            total[key] = total.get(key, Fraction(0)) + c * h
    return {e: c for e, c in total.items() if c}


def _sum(a: _Poly, b: _Poly) -> _Poly:
    total = dict(a)
    for e, c in b.items():
        total[e] = total.get(e, Fraction(0)) + c
    return {e: c for e, c in total.items() if c}


def _times(a: _Poly, factor: Fraction) -> _Poly:
    return {e: c * factor for e, c in a.items()}
