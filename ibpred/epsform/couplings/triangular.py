"""Off the diagonal: exact elimination of everything but simple poles, block by block.

The diagonal blocks are in epsilon-form already. For row block i the couplings to j = i-1, ..., 0 are taken
in turn; ``1 + D`` with D in block (i, j) adds ``A_ii D - D A_jj - D'`` to the coupling. At a place q with a
pole of order m + 1 > 1 the leading term is removed by ``D = D0 / q^m``, where D0 solves

    (m + eps ad) (q' D0) = -lead,     ad X = R_i X - X R_j   (residues of the diagonal at q),

which is always possible for generic eps; growth like ``x^(m-1)`` at infinity likewise by ``D0 x^m`` with
``(m - eps ad_inf) D0 = lead``. Where the two blocks carry different square roots, the coupling and D are
taken without the factor W of `tags`; then m is replaced by m - 1/2 at the zeros of R and by m + deg(R)/2 at
infinity, and there ``sqrt(R) B`` must be Fuchsian in the end.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

from ibpred.epsform.couplings.mixed import reduced_mixed
from ibpred.epsform.form import Matrix
from ibpred.epsform.matrices import Constants, added, identity, product, scaled, solve, subtracted
from ibpred.epsform.places import Place, Residue, degree, growth, leading, places_of, positive
from ibpred.epsform.places import place as finite_place
from ibpred.epsform.roots.tags import Tag, difference, only_in, product_of
from ibpred.exact.rational import Rational, Ring
from ibpred.progress import SILENT, Progress

Residues = Mapping[str, Constants]
"""Canonical residues of a diagonal block by the text of the letter."""
Grid = list[list[Matrix]]
"""A matrix cut into blocks."""


@dataclass(frozen=True)
class Relation:
    """How two tags differ: W and R of `tags`, the places where R vanishes, and its degree in the variable."""

    weight: Rational
    root: Rational
    places: frozenset[str]
    degree: int


def eliminate(
    grid: Grid,
    residues: Sequence[Residues],
    letters: Mapping[str, Place],
    tags: Sequence[Sequence[Tag]],
    ring: Ring,
    name: str,
    progress: Progress = SILENT,
) -> tuple[Grid, Grid]:
    """Make all couplings Fuchsian.

    Parameters
    ----------
    grid
        The system cut into blocks, block lower triangular, in the rational basis: the diagonal in
        epsilon-form up to the exponents -1/2 of the tags.
    residues
        For each diagonal block its canonical residues (the coefficients of eps).
    letters
        The places of these residues by their text.
    tags
        The tags of the functions of each block.
    progress
        Told about the rows of blocks done.

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
        progress.advance(i, count)
        for j in range(i - 1, -1, -1):
            diagonal = (grid[i][i], grid[j][j])
            if len(set(tags[i])) == len(set(tags[j])) == 1:
                relation = _relation(tags[i][0], tags[j][0], ring, name)
                change, rest = _reduced(
                    grid[i][j], diagonal, (residues[i], residues[j]), letters, relation, name
                )
            else:
                change, rest = reduced_mixed(grid[i][j], diagonal, (tags[i], tags[j]), name)
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
    relation: Relation,
    name: str,
) -> tuple[Matrix, Matrix]:
    """D for one coupling, and what is left of the coupling."""
    ring = diagonal[0][0][0].ring
    total = _zero(ring, len(coupling), len(coupling[0]))
    half = Fraction(1, 2)
    if not relation.weight.is_one():
        coupling = scaled(coupling, 1 / relation.weight)
        # 1 + W D: the logarithmic derivative of W goes with the diagonal
        log = relation.weight.derivative(name) / relation.weight
        diagonal = (subtracted(diagonal[0], scaled(identity(ring, len(coupling)), log)), diagonal[1])
    x = ring.variable(name)
    for spot in places_of((e for row in coupling for e in row), ring, name):
        local = _at(residues, spot.text())
        slope = spot.slope()
        shift = half if spot.text() in relation.places else Fraction(0)
        while (power := _order(coupling, spot) - 1) > 0:
            lead = [[spot.divide(spot.principal(e, power + 1), slope) for e in row] for row in coupling]
            step = _solve_place(lead, power, power - shift, local, spot)
            total = added(total, step)
            coupling = _applied(coupling, step, diagonal, name)
    at_infinity = _infinity(residues, letters)
    lowest = 0 if relation.degree else 1
    while (power := max((growth(e, name) for row in coupling for e in row if e), default=-2) + 1) >= lowest:
        target = tuple(
            tuple(leading(e, name) if e and growth(e, name) == power - 1 else ring.zero for e in row)
            for row in coupling
        )
        step = _sylvester(target, power + half * relation.degree, at_infinity, Fraction(-1), ring)
        step = tuple(tuple(e * x**power for e in row) for row in step)
        total = added(total, step)
        coupling = _applied(coupling, step, diagonal, name)
    if not relation.weight.is_one():
        total, coupling = scaled(total, relation.weight), scaled(coupling, relation.weight)
    return total, coupling


def _relation(left: Tag, right: Tag, ring: Ring, name: str) -> Relation:
    roots = difference(left, right)
    depending = [root.numerator for root in roots if degree(root.numerator, ring, name)]
    places = frozenset(finite_place(positive(p), ring, name).text() for p in depending)
    total = sum(degree(p, ring, name) for p in depending)
    return Relation(product_of(only_in(right, left), ring), product_of(roots, ring), places, total)


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
    lead: list[list[Residue]],
    power: int,
    exponent: Fraction,
    local: tuple[Constants | None, Constants | None],
    place: Place,
) -> Matrix:
    """``D0 / q^power``: the equation has constant coefficients, so it is solved power by power of x."""
    ring = place.ring
    parts = []
    for k in range(place.degree):
        target = tuple(tuple(-entry[k] for entry in row) for row in lead)
        parts.append(_sylvester(target, exponent, local, Fraction(1), ring))
    below = place.element**power
    return tuple(
        tuple(place.lift(tuple(part[i][j] for part in parts)) / below for j in range(len(lead[0])))
        for i in range(len(lead))
    )


def _sylvester(
    target: Matrix,
    power: Fraction,
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
