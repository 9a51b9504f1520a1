"""A system d/dx - N(x)/D(x) at numeric eps modulo a prime, and its changes of basis."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import flint

ModularPolynomial = Any  # flint.nmod_poly
ModularMatrix = Any  # flint.nmod_mat
PolynomialMatrix = tuple[tuple[ModularPolynomial, ...], ...]


@dataclass(frozen=True)
class Pencil:
    """``y' = (numerators / denominator) y`` over F_p(x), without common factor at the points of interest."""

    prime: int
    numerators: PolynomialMatrix
    denominator: ModularPolynomial

    @property
    def size(self) -> int:
        return len(self.numerators)


@dataclass(frozen=True)
class Frame:
    """A basis over F_p(x): columns ``numerators / denominator``, and the inverse matrix likewise."""

    prime: int
    numerators: PolynomialMatrix
    denominator: ModularPolynomial
    inverse_numerators: PolynomialMatrix
    inverse_denominator: ModularPolynomial


def constant(value: int, prime: int) -> ModularPolynomial:
    """A constant polynomial."""
    return flint.nmod_poly([value % prime], prime)


def shift(point: int, prime: int) -> ModularPolynomial:
    """The polynomial ``x - point``."""
    return flint.nmod_poly([-point % prime, 1], prime)


def unit_frame(size: int, prime: int) -> Frame:
    """The basis one starts with."""
    one, zero = constant(1, prime), constant(0, prime)
    unit = tuple(tuple(one if i == j else zero for j in range(size)) for i in range(size))
    return Frame(prime, unit, one, unit, one)


def times_constant(left: PolynomialMatrix, right: ModularMatrix) -> PolynomialMatrix:
    """Polynomial matrix times a matrix of constants."""
    size = right.ncols()
    table = right.table()
    prime = int(right.modulus())
    found = []
    for row in left:
        new = []
        for j in range(size):
            total = flint.nmod_poly([], prime)
            for k, entry in enumerate(row):
                factor = table[k][j]
                if int(factor) and entry:
                    total = total + entry * int(factor)
            new.append(total)
        found.append(tuple(new))
    return tuple(found)


def transposed(matrix: PolynomialMatrix) -> PolynomialMatrix:
    """Transposed polynomial matrix."""
    return tuple(zip(*matrix, strict=True))


def constant_times(left: ModularMatrix, right: PolynomialMatrix) -> PolynomialMatrix:
    """A matrix of constants times a polynomial matrix."""
    return transposed(times_constant(transposed(right), left.transpose()))


def order_at(polynomial: ModularPolynomial, point: int, prime: int) -> int:
    """Multiplicity of a root (of a nonzero polynomial)."""
    factor, count = shift(point, prime), 0
    while int(polynomial(point)) == 0:
        polynomial, count = polynomial // factor, count + 1
    return count


def cancelled(pencil: Pencil, point: int) -> Pencil:
    """The same system without the common factors ``x - point``."""
    prime, numerators, denominator = pencil.prime, pencil.numerators, pencil.denominator
    factor = shift(point, prime)
    while int(denominator(point)) == 0 and all(int(e(point)) == 0 for row in numerators for e in row):
        denominator = denominator // factor
        numerators = tuple(tuple(e // factor for e in row) for row in numerators)
    return Pencil(prime, numerators, denominator)


def pole_order(pencil: Pencil, point: int) -> int:
    """Order of the pole at a point (of a system with no common factor there)."""
    return order_at(pencil.denominator, point, pencil.prime)


def leading_matrix(pencil: Pencil, point: int) -> ModularMatrix:
    """Coefficient of ``(x - point)^(-order)`` at a pole."""
    prime = pencil.prime
    rest, factor = pencil.denominator, shift(point, prime)
    while int(rest(point)) == 0:
        rest = rest // factor
    scale = pow(int(rest(point)), -1, prime)
    values = [int(e(point)) * scale % prime for row in pencil.numerators for e in row]
    return flint.nmod_mat(pencil.size, pencil.size, values, prime)


def sheared(pencil: Pencil, basis: ModularMatrix, count: int, power: int, point: int) -> Pencil:
    """The system in the basis ``S diag((x - point)^power, ..., 1, ...)``.

    Parameters
    ----------
    basis
        S, an invertible matrix of constants.
    count
        The first `count` vectors of S are multiplied by the power.
    power
        +1 or -1.
    """
    prime = pencil.prime
    factor = shift(point, prime)
    numerators = constant_times(basis.inv(), times_constant(pencil.numerators, basis))
    denominator = pencil.denominator
    # everything is brought over denominator * (x - point): entries that gain a pole stay as they are
    rows = []
    for i, row in enumerate(numerators):
        new = []
        for j, entry in enumerate(row):
            gain = power * ((j < count) - (i < count)) + 1
            value = entry * factor**gain if gain else entry
            if i == j and i < count:
                value = value - denominator * power
            new.append(value)
        rows.append(tuple(new))
    return cancelled(Pencil(prime, tuple(rows), denominator * factor), point)


def sheared_frame(frame: Frame, basis: ModularMatrix, count: int, power: int, point: int) -> Frame:
    """The basis after the same step as `sheared`."""
    factor = shift(point, frame.prime)
    columns = times_constant(frame.numerators, basis)
    rows = constant_times(basis.inv(), frame.inverse_numerators)
    denominator, inverse_denominator = frame.denominator, frame.inverse_denominator
    moved, fixed = (factor, None) if power > 0 else (None, factor)
    new = tuple(tuple(_times(e, moved if j < count else fixed) for j, e in enumerate(row)) for row in columns)
    moved, fixed = fixed, moved
    inverse = tuple(
        tuple(_times(e, moved if i < count else fixed) for e in row) for i, row in enumerate(rows)
    )
    if power < 0:
        denominator = denominator * factor
    else:
        inverse_denominator = inverse_denominator * factor
    return Frame(frame.prime, new, denominator, inverse, inverse_denominator)


def _times(entry: ModularPolynomial, factor: ModularPolynomial | None) -> ModularPolynomial:
    return entry if factor is None else entry * factor


def at_infinity(pencil: Pencil) -> Pencil:
    """The system in ``y = 1/x``: ``-(1/y^2) A(1/y)``."""
    prime = pencil.prime
    top = max((e.degree() for row in pencil.numerators for e in row), default=0)
    top = max(top, 0)
    bottom = pencil.denominator.degree()
    numerators = tuple(tuple(-e.reverse(top) if e else e for e in row) for row in pencil.numerators)
    denominator = pencil.denominator.reverse(bottom)
    power = bottom - top - 2
    monomial = shift(0, prime)
    if power >= 0:
        numerators = tuple(tuple(e * monomial**power for e in row) for row in numerators)
    else:
        denominator = denominator * monomial**-power
    return cancelled(Pencil(prime, numerators, denominator), 0)


def column_space(matrix: ModularMatrix) -> list[list[int]]:
    """A basis of the image, as lists of residues, in reduced echelon form."""
    reduced, rank = matrix.transpose().rref()
    return [[int(e) for e in row] for row in reduced.tolist()[:rank]]


def kernel(matrix: ModularMatrix) -> list[list[int]]:
    """A basis of the null space, as lists of residues."""
    vectors, nullity = matrix.nullspace()
    return [[int(vectors[i, j]) for i in range(vectors.nrows())] for j in range(nullity)]


def completed(vectors: Sequence[Sequence[int]], size: int, prime: int) -> ModularMatrix:
    """An invertible matrix whose first columns are the given independent vectors, then unit vectors."""
    rows = [list(v) for v in vectors]
    units = [[int(i == j) for j in range(size)] for i in range(size)]
    trial = flint.nmod_mat(len(rows) + size, size, [e for row in [*rows, *units] for e in row], prime)
    echelon = trial.transpose().rref()[0]
    columns, row = [], 0
    for j in range(trial.nrows()):
        if row < size and int(echelon[row, j]):
            columns.append(j)
            row += 1
    chosen = [[*rows, *units][j] for j in columns]
    return flint.nmod_mat(size, size, [e for r in chosen for e in r], prime).transpose()
