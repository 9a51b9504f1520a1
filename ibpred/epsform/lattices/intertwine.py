"""Matrices C with ``B_l C = C A_l`` for all letters, modulo a prime, one block of rows at a time.

With ``B_l = R_l(eps)/eps`` and ``A_l = R_l(mu)/mu`` for a fixed number mu, such a C(eps) factors eps out of
a Fuchsian system whose exponents are proportional to eps; if any matrix does, this one does (the condition
is linear in C: Lee, arXiv:1411.0911).
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from fractions import Fraction
from itertools import combinations
from random import Random

import flint

from ibpred.epsform.lattices.pencil import ModularMatrix, kernel

Positions = Sequence[Sequence[int]]
"""For each row the columns where a matrix may be nonzero, ascending."""


REFERENCE_DENOMINATORS = (7, 11, 13, 17, 19, 31, 101)
"""The numbers mu are one over these: small, so that the matrices at mu stay simple."""


def reference_numbers(slopes: Iterable[Sequence[Fraction]]) -> Iterator[Fraction]:
    """Numbers mu at which exponents with the given slopes differ by no integer but zero.

    Parameters
    ----------
    slopes
        Polynomials of slopes as in `Exponent`; only rational slopes matter here.
    """
    rational = sorted({-s[0] for s in slopes if len(s) == 2})
    for denominator in REFERENCE_DENOMINATORS:
        number = Fraction(1, denominator)
        differences = ((b - a) * number for a, b in combinations(rational, 2))
        if all(d.denominator > 1 for d in differences):
            yield number


def modular_number(number: Fraction, prime: int) -> int:
    """A rational number modulo a prime."""
    return number.numerator * pow(number.denominator, -1, prime) % prime


def closure(patterns: Sequence[Sequence[bool]], blocks: Sequence[range]) -> tuple[tuple[int, ...], ...]:
    """Transitive closure of a pattern, diagonal blocks included: the columns of each row."""
    size = len(patterns)
    reach = [{j for j in range(size) if patterns[i][j]} for i in range(size)]
    for block in blocks:
        for i in block:
            reach[i] |= set(block)
    for middle in range(size):
        for i in range(size):
            if middle in reach[i]:
                reach[i] |= reach[middle]
    return tuple(tuple(sorted(r)) for r in reach)


def intertwiners(
    left: Sequence[ModularMatrix],
    right: Sequence[ModularMatrix],
    blocks: Sequence[range],
    support: Positions,
    seed: int,
) -> list[ModularMatrix] | range:
    """A basis of the solutions C of ``left_l C = C right_l``.

    Parameters
    ----------
    left, right
        One n x n matrix for each letter, block lower triangular.
    blocks
        The rows of each diagonal block, in order.
    support
        Columns where C may be nonzero.
    seed
        For the test whether some solution is invertible on a block.

    Returns
    -------
    basis or range
        The basis in reduced echelon form, diagonal entries counted first; or the first block on which no
        solution is invertible.
    """
    size, prime = left[0].nrows(), int(left[0].modulus())
    random = Random(seed)
    basis: list[ModularMatrix] = []
    for block in blocks:
        basis = _extended(basis, left, right, block, support)
        trial = flint.nmod_mat(len(block), len(block), prime)
        for matrix in basis:
            factor = random.randrange(1, prime)
            for i, r in enumerate(block):
                for j, c in enumerate(block):
                    trial[i, j] = int(trial[i, j]) + factor * int(matrix[r, c])
        if trial.rank() < len(block):
            return block
    return _echelon(basis, size, support, prime)


def _extended(
    basis: list[ModularMatrix],
    left: Sequence[ModularMatrix],
    right: Sequence[ModularMatrix],
    block: range,
    support: Positions,
) -> list[ModularMatrix]:
    """Solutions on the rows up to and including a block from those on the rows before it."""
    size, prime = left[0].nrows(), int(left[0].modulus())
    places = [(r, c) for r in block for c in support[r]]
    index = {place: len(basis) + k for k, place in enumerate(places)}
    unknowns = len(basis) + len(places)
    rows: list[list[int]] = []
    own = sorted({c for r in block for c in support[r]})
    for b, a in zip(left, right, strict=True):
        b_rows = [[int(b[r, m]) for m in range(size)] for r in block]
        a_table = {m: [(c, int(a[m, c])) for c in range(size) if int(a[m, c])] for m in own}
        # the columns where a product may be nonzero
        columns = sorted(
            {c for row in b_rows for m, factor in enumerate(row) if factor for c in support[m]}
            | {c for entries in a_table.values() for c, _ in entries}
        )
        flat = [e for row in b_rows for e in row]
        known = flint.nmod_mat(len(block), size, flat, prime)
        images = [(known * matrix).table() for matrix in basis]
        for i, r in enumerate(block):
            equations = {c: [0] * unknowns for c in columns}
            for alpha, image in enumerate(images):
                for c in columns:
                    equations[c][alpha] = int(image[i][c])
            for m in block:
                factor = b_rows[i][m]
                if factor:
                    for c in support[m]:
                        equations[c][index[m, c]] += factor
            for m in support[r]:
                for c, value in a_table[m]:
                    equations[c][index[r, m]] -= value
            rows.extend([e % prime for e in row] for row in equations.values() if any(row))
    if rows:
        vectors = kernel(flint.nmod_mat(len(rows), unknowns, [e for row in rows for e in row], prime))
    else:
        vectors = [[int(i == j) for j in range(unknowns)] for i in range(unknowns)]
    found = []
    for vector in vectors:
        total = flint.nmod_mat(size, size, prime)
        for alpha, matrix in enumerate(basis):
            if vector[alpha]:
                total = total + matrix * vector[alpha]
        for place, k in index.items():
            total[place] = vector[k]
        found.append(total)
    return found


def _echelon(basis: list[ModularMatrix], size: int, support: Positions, prime: int) -> list[ModularMatrix]:
    places = [(i, i) for i in range(size)]
    places += [(i, j) for i in range(size) for j in support[i] if i != j]
    values = [int(matrix[place]) for matrix in basis for place in places]
    reduced, rank = flint.nmod_mat(len(basis), len(places), values, prime).rref()
    found = []
    for k in range(rank):
        matrix = flint.nmod_mat(size, size, prime)
        for column, place in enumerate(places):
            matrix[place] = int(reduced[k, column])
        found.append(matrix)
    return found


def representative(basis: Sequence[ModularMatrix], seed: int) -> ModularMatrix:
    """An invertible solution, the same combination of the echelon basis in every sample.

    The vectors that start on the diagonal are added with weight one and the others left out; where that
    is singular, all are added with small random weights.
    """
    size, prime = basis[0].nrows(), int(basis[0].modulus())
    total = flint.nmod_mat(size, size, prime)
    for matrix in basis:
        if any(int(matrix[i, i]) for i in range(size)):
            total = total + matrix
    random = Random(seed)
    while total.rank() < size:
        total = flint.nmod_mat(size, size, prime)
        for matrix in basis:
            total = total + matrix * random.randrange(1, 20)
    return total
