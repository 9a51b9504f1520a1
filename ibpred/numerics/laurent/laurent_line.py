"""Laurent coefficients of the masters carried along a line by the differential system, order by order.

Neither an epsilon-form nor numeric eps is needed: ``J_i = eps^(r_i) I_i`` obeys a system without poles at
eps = 0 (`ibpred.numerics.laurent.expanded`), whose coefficients of eps^0, eps^1, ... form one larger system
over Q(x) on the line. The continuation is rigorous; the errors of the values at the start are carried along.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import pairwise

import flint

from ibpred.balls.context import Ball, precision
from ibpred.diffeq.system import DifferentialSystem
from ibpred.errors import InputError, PrecisionError
from ibpred.exact.rational import Rational
from ibpred.numerics.frobenius.basis import in_basis, small_basis
from ibpred.numerics.frobenius.continuation import carried
from ibpred.numerics.frobenius.layers import by_functions, whole_system
from ibpred.numerics.frobenius.path import Path, Point, approximate
from ibpred.numerics.frobenius.poles import PartialFractions, partial_fractions
from ibpred.numerics.frobenius.spectrum import ExactMatrix
from ibpred.numerics.frobenius.tracks import BallMatrix, all_positions
from ibpred.numerics.laurent.crossings import around, crossings
from ibpred.numerics.laurent.expanded import ExpandedSystem, layers_on_line
from ibpred.progress import SILENT, Progress

_GUARD_BITS = 64
_MOST_FOLD = 12  # working bits over wanted bits

Laurent = Mapping[int, Ball]
"""Power of eps -> coefficient; what is missing below the highest power vanishes."""


@dataclass(frozen=True)
class LaurentLine:
    """A line between two points with the system on it.

    Attributes
    ----------
    fractions
        The system of all orders together, order k of function i in row ``k n + i``.
    basis, inverse
        ``eps^(r_i) I_i = (basis y)_i`` for the functions y of that system, and the inverse matrix.
    path
        From 0 to 1 around the singular points.
    shifts
        r_i.
    depth
        How many orders.
    """

    fractions: PartialFractions
    basis: ExactMatrix
    inverse: ExactMatrix
    path: Path
    shifts: tuple[int, ...]
    depth: int


def laurent_line(
    expanded: ExpandedSystem,
    locus: Sequence[Rational],
    start: Mapping[str, Fraction],
    end: Mapping[str, Fraction],
    turns: Mapping[str, int],
) -> LaurentLine:
    """Plan the way between two points.

    Parameters
    ----------
    expanded
        The system order by order, to as many orders as are carried.
    locus
        Irreducible polynomials in the invariants: where the system is singular.
    start, end
        Two regular points.
    turns
        For every invariant the sign of the imaginary part that i0 gives it, or 0.

    Raises
    ------
    PointError
        If a point or the whole line is singular, or no way is found.
    """
    depth = len(next(iter(expanded.matrices.values()), ()))
    if depth == 0:
        raise InputError("a system in at least one invariant and one order is needed")
    passed = crossings(locus, start, end, turns)
    layers = layers_on_line(expanded, start, end)
    basis = small_basis(partial_fractions(layers.matrices[0]))
    inverse = basis.inv()
    fractions = by_functions(partial_fractions(whole_system(in_basis(layers, basis, inverse))))
    path = around(approximate(all_positions(fractions, 64)), passed)
    return LaurentLine(fractions, basis, inverse, path, expanded.shifts, depth)


def spread(expanded: ExpandedSystem) -> int:
    """How many more powers of eps are needed at the start than are had at the end."""
    return max(expanded.shifts) - min(expanded.shifts)


def carry_laurent(
    line: LaurentLine,
    values: Sequence[Laurent],
    lowest: int,
    highest: int,
    bits: int,
    progress: Progress = SILENT,
) -> tuple[dict[int, Ball], ...]:
    """The masters at the end of a line.

    Parameters
    ----------
    line
        The line; its depth must be ``highest + max r - lowest + 1``.
    values
        Laurent coefficients of every master at the start, that of number i through
        ``highest + max r - r_i``.
    lowest
        The lowest power of any ``eps^(r_i) I_i``.
    highest
        Highest power of all masters at the end.
    bits
        Working precision.
    progress
        Told about the steps done.

    Returns
    -------
    For each master its coefficients from the lowest power it can have on, as far as at the start.
    """
    top = highest + max(line.shifts)
    if line.depth != top - lowest + 1:
        raise InputError(f"the line holds {line.depth} orders, the values need {top - lowest + 1}")
    orders = [
        flint.acb_mat(
            [[values[i].get(lowest + k - shift, flint.acb(0))] for i, shift in enumerate(line.shifts)]
        )
        for k in range(line.depth)
    ]
    with precision(bits):
        orders = [flint.acb_mat(line.inverse) * column for column in orders]
    guard = _GUARD_BITS
    for done, step in enumerate(pairwise(line.path)):
        progress.advance(done, len(line.path) - 1)
        blocks, guard = _transfer(line, step, bits, guard)
        with precision(bits):
            orders = [_applied(blocks, orders, k) for k in range(line.depth)]
    with precision(bits):
        orders = [flint.acb_mat(line.basis) * column for column in orders]
    return tuple(
        {lowest + k - shift: orders[k][i, 0] for k in range(line.depth)}
        for i, shift in enumerate(line.shifts)
    )


def _applied(blocks: Sequence[BallMatrix], orders: Sequence[BallMatrix], k: int) -> BallMatrix:
    total = blocks[0] * orders[k]
    for j in range(1, k + 1):
        total = total + blocks[j] * orders[k - j]
    return total


def _transfer(
    line: LaurentLine, step: tuple[Point, Point], bits: int, guard: int
) -> tuple[list[BallMatrix], int]:
    """The matrices U_j of ``J^(k)(end) = sum_j U_j J^(k-j)(start)`` for one step.

    They start from exact unit vectors: balls that start wide would grow far beyond the true errors in the
    recurrences of the series, whose rounding errors only ask for more bits. The first try has as many as the
    step before took.
    """
    size = len(line.shifts)
    rows = size * line.depth
    unit = flint.acb_mat([[flint.acb(1 if i == j else 0) for j in range(size)] for i in range(rows)])
    working = bits + guard
    while True:
        last = working > _MOST_FOLD * (bits + _GUARD_BITS)
        try:
            found = carried(line.fractions, step, unit, working)
        except PrecisionError:
            if last:
                raise
        else:
            if _is_sharp(found, bits):
                break
            if last:
                raise PrecisionError("the series on the way to the point lose their digits; move the point")
        working += working // 4
    table = found.table()
    blocks = [flint.acb_mat(table[j * size : (j + 1) * size]) for j in range(line.depth)]
    return blocks, max(working - bits, _GUARD_BITS)


def _is_sharp(matrix: BallMatrix, bits: int) -> bool:
    """Whether no entry's radius exceeds ``2^-bits`` of the largest entry."""
    entries = matrix.entries()
    if not all(value.is_finite() for value in entries):
        return False
    with precision(64):
        size = max((value.mid().abs_upper() for value in entries), key=float)
        goal = size * flint.arb(2) ** (-bits)
        return all(value.real.rad() <= goal and value.imag.rad() <= goal for value in entries)


def line_depth(expanded_shifts: Sequence[int], lowest: int, highest: int) -> int:
    """How many orders a line must hold (see `carry_laurent`)."""
    return highest + max(expanded_shifts) - lowest + 1


def regular_locus(system: DifferentialSystem) -> tuple[Rational, ...]:
    """The singular locus in the invariants alone."""
    return tuple(letter for letter in system.singular_locus if "d" not in letter.variables())
