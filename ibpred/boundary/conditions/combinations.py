"""Rational combinations of canonical functions in which all coefficients of the masters vanish at a point."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

import flint

from ibpred.exact.rational import Rational
from ibpred.iterated.transport import Infinity, Point

Combination = tuple[Fraction, ...]


def vanishing_combinations(
    inverse: Sequence[Sequence[Rational]], variable: str, point: Point
) -> tuple[Combination, ...]:
    """A basis of the constant vectors v such that ``v T^-1`` vanishes at a point of one variable.

    Combinations of several functions only: a single function that vanishes is seen without help.

    Parameters
    ----------
    inverse
        T^-1, functions of eps and the variable.
    variable
        The variable.
    point
        A number or infinity.
    """
    size = len(inverse)
    equations: list[list[int]] = []
    for column in zip(*inverse, strict=True):
        equations += _equations(column, variable, point)
    if not equations:
        return ()
    reduced, rank = flint.fmpq_mat(len(equations), size, [v for row in equations for v in row]).rref()
    rows = [[Fraction(int(v.p), int(v.q)) for v in row] for row in reduced.tolist()[:rank]]
    pivots = [next(j for j, v in enumerate(row) if v) for row in rows]
    found = []
    for free in (j for j in range(size) if j not in pivots):
        vector = [Fraction(int(j == free)) for j in range(size)]
        for row, pivot in zip(rows, pivots, strict=True):
            vector[pivot] = -row[free]
        if sum(map(bool, vector)) > 1:
            found.append(tuple(vector))
    return tuple(found)


def _equations(column: Sequence[Rational], variable: str, point: Point) -> list[list[int]]:
    """What v must satisfy for one master: coefficients of powers of eps and of the distance."""
    ring = column[0].ring
    one = ring.context.constant(1)
    common = one
    for entry in column:
        common = common * (entry.denominator / common.gcd(entry.denominator))
    place = ring.index(variable)
    tops = [entry.numerator * (common / entry.denominator) for entry in column]
    if isinstance(point, Infinity):
        least = int(common.degrees()[place])
        tables = [{e: c for e, c in top.to_dict().items() if int(e[place]) >= least} for top in tops]
    else:
        shift = {variable: ring.variable(variable) + point}
        moved = [Rational(ring, top, one).substitute(shift) for top in (common, *tops)]
        scale = 1
        for value in moved:
            scale = scale * int(value.denominator.leading_coefficient())
        polynomials = [(value * scale).numerator for value in moved]
        most = min(int(e[place]) for e in polynomials[0].to_dict())
        tables = [{e: c for e, c in p.to_dict().items() if int(e[place]) <= most} for p in polynomials[1:]]
    keys = sorted({tuple(map(int, key)) for table in tables for key in table})
    plain = [{tuple(map(int, key)): int(c) for key, c in table.items()} for table in tables]
    return [[table.get(key, 0) for table in plain] for key in keys]
