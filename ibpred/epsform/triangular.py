"""Off the diagonal: exact elimination of everything but simple poles, block by block.

The diagonal blocks are in epsilon-form already. For row block i the couplings to j = i-1, ..., 0 are taken
in turn; ``1 + D`` with D in block (i, j) adds ``A_ii D - D A_jj - D'`` to the coupling. At a place q with a
pole of order m + 1 > 1 the leading term is removed by ``D = D0 / q^m``, where D0 solves

    (m + eps ad) (q' D0) = -lead,     ad X = R_i X - X R_j   (residues of the diagonal at q),

which is always possible for generic eps; growth like ``x^(m-1)`` at infinity likewise by ``D0 x^m`` with
``(m - eps ad_inf) D0 = lead``. Since only the integer m and the residues enter, half-integer exponents
(square roots that multiply single functions) would shift m by one half and change nothing else.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction

from ibpred.epsform.form import Matrix
from ibpred.epsform.matrices import Constants, added, product, solve, subtracted
from ibpred.epsform.places import Place, Residue, growth, leading, places_of
from ibpred.exact.rational import Rational, Ring

Residues = Mapping[str, Constants]
"""Canonical residues of a diagonal block by the text of the letter."""
Grid = list[list[Matrix]]
"""A matrix cut into blocks."""


def eliminate(
    grid: Grid, residues: Sequence[Residues], letters: Mapping[str, Place], ring: Ring, name: str
) -> tuple[Grid, Grid]:
    """Make all couplings Fuchsian.

    Parameters
    ----------
    grid
        The system cut into blocks, block lower triangular, with the diagonal in epsilon-form.
    residues
        For each diagonal block its canonical residues (the coefficients of eps).
    letters
        The places of these residues by their text.

    Returns
    -------
    grid
        The system in the new basis: simple poles only (also at infinity).
    change
        D by blocks: the new basis is ``1 + D``.
    """
    count = len(grid)
    grid = [list(row) for row in grid]
    zero = [[_zero(ring, len(grid[i][i]), len(grid[j][j])) for j in range(count)] for i in range(count)]
    changes: Grid = zero
    for i in range(count):
        for j in range(i - 1, -1, -1):
            change, rest = _reduced(
                grid[i][j], (grid[i][i], grid[j][j]), (residues[i], residues[j]), letters, name
            )
            changes[i][j] = change
            grid[i][j] = rest
            if not any(e for row in change for e in row):
                continue
            for k in range(j):
                grid[i][k] = subtracted(grid[i][k], product(change, grid[j][k], ring))
        for k in range(i + 1, count):
            if not any(e for row in grid[k][i] for e in row):
                continue
            for j in range(i):
                grid[k][j] = added(grid[k][j], product(grid[k][i], changes[i][j], ring))
    return grid, changes


def _zero(ring: Ring, rows: int, columns: int) -> Matrix:
    return tuple((ring.zero,) * columns for _ in range(rows))


def _reduced(
    coupling: Matrix,
    diagonal: tuple[Matrix, Matrix],
    residues: tuple[Residues, Residues],
    letters: Mapping[str, Place],
    name: str,
) -> tuple[Matrix, Matrix]:
    """D for one coupling, and what is left of the coupling."""
    ring = diagonal[0][0][0].ring
    total = _zero(ring, len(coupling), len(coupling[0]))
    x = ring.variable(name)
    for place in places_of((e for row in coupling for e in row), ring, name):
        local = _at(residues, place.text())
        slope = place.slope()
        while (power := _order(coupling, place) - 1) > 0:
            lead = [[place.divide(place.principal(e, power + 1), slope) for e in row] for row in coupling]
            step = _solve_place(lead, power, local, place)
            total = added(total, step)
            coupling = _applied(coupling, step, diagonal, name)
    at_infinity = _infinity(residues, letters)
    while (power := max((growth(e, name) for row in coupling for e in row if e), default=-1) + 1) > 0:
        target = tuple(
            tuple(leading(e, name) if e and growth(e, name) == power - 1 else ring.zero for e in row)
            for row in coupling
        )
        step = _sylvester(target, power, at_infinity, Fraction(-1), ring)
        step = tuple(tuple(e * x**power for e in row) for row in step)
        total = added(total, step)
        coupling = _applied(coupling, step, diagonal, name)
    return total, coupling


def _applied(coupling: Matrix, step: Matrix, diagonal: tuple[Matrix, Matrix], name: str) -> Matrix:
    ring = diagonal[0][0][0].ring
    change = subtracted(product(diagonal[0], step, ring), product(step, diagonal[1], ring))
    slope = tuple(tuple(e.derivative(name) if e else e for e in row) for row in step)
    return added(coupling, subtracted(change, slope))


def _order(coupling: Matrix, place: Place) -> int:
    return max((place.order(e.denominator)[0] for row in coupling for e in row if e), default=0)


def _at(residues: tuple[Residues, Residues], text: str) -> tuple[Constants | None, Constants | None]:
    return residues[0].get(text), residues[1].get(text)


def _infinity(
    residues: tuple[Residues, Residues], letters: Mapping[str, Place]
) -> tuple[Constants | None, Constants | None]:
    """Sum of the residues over all finite points."""
    found: list[Constants | None] = []
    for block in residues:
        total: Constants | None = None
        for text, constants in block.items():
            if text not in letters:
                continue  # a letter of the other ratios
            weight = letters[text].degree
            if total is None:
                total = tuple(tuple(v * weight for v in row) for row in constants)
            else:
                total = tuple(
                    tuple(a + v * weight for a, v in zip(x, y, strict=True))
                    for x, y in zip(total, constants, strict=True)
                )
        found.append(total)
    return found[0], found[1]


def _solve_place(
    lead: list[list[Residue]], power: int, local: tuple[Constants | None, Constants | None], place: Place
) -> Matrix:
    """``D0 / q^power``: the equation has constant coefficients, so it is solved power by power of x."""
    ring = place.ring
    parts = []
    for k in range(place.degree):
        target = tuple(tuple(-entry[k] for entry in row) for row in lead)
        parts.append(_sylvester(target, power, local, Fraction(1), ring))
    below = place.element**power
    return tuple(
        tuple(place.lift(tuple(part[i][j] for part in parts)) / below for j in range(len(lead[0])))
        for i in range(len(lead))
    )


def _sylvester(
    target: Matrix,
    power: int,
    local: tuple[Constants | None, Constants | None],
    sign: Fraction,
    ring: Ring,
) -> Matrix:
    """X with ``(power + sign eps ad) X = target``."""
    left, right = local
    rows, columns = len(target), len(target[0])
    eps = ring.variable("eps")
    if rows == columns == 1:
        slope = (left[0][0] if left else 0) - (right[0][0] if right else 0)
        value = target[0][0]
        return ((value / (power + eps * (sign * slope)) if value else value,),)
    size = rows * columns
    matrix: list[list[Rational]] = [[ring.zero] * size for _ in range(size)]
    for i in range(rows):
        for j in range(columns):
            here = i * columns + j
            matrix[here][here] = ring.constant(power)
            if left:
                for k in range(rows):
                    if left[i][k]:
                        matrix[here][k * columns + j] += eps * (sign * left[i][k])
            if right:
                for k in range(columns):
                    if right[k][j]:
                        matrix[here][i * columns + k] -= eps * (sign * right[k][j])
    flat = tuple((e,) for row in target for e in row)
    solution = solve(tuple(map(tuple, matrix)), flat, ring)
    return tuple(tuple(solution[i * columns + j][0] for j in range(columns)) for i in range(rows))
