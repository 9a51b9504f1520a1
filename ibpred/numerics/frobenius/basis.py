"""A constant basis in which the matrices of a system are small.

Balls widen in the recurrence of a local series as the sum of the moduli of the matrices would make a solution
grow: like ``n^M``, M the largest eigenvalue of that sum. Master integrals with numerators give M of some
hundreds where the exponents are below ten; elimination between the functions of a coupled block brings M down
by factors. Any basis gives the same solutions, so a search in floating point will do.
"""

from __future__ import annotations

from fractions import Fraction
from math import frexp

import flint
import numpy as np

from ibpred.numerics.frobenius.layers import Layers
from ibpred.numerics.frobenius.poles import PartialFractions
from ibpred.numerics.frobenius.spectrum import ExactMatrix, coupled_blocks
from ibpred.numerics.frobenius.system import RationalSystem, fmpq, rational_system
from ibpred.numerics.frobenius.weights import Floats, perron_weights

_STEPS = tuple(Fraction(sign, 2**k) for k in (0, 1, 2, 3, 5, 7) for sign in (1, -1))
_LARGEST_BLOCK = 8
_SWEEPS = 10
_WORTH = 0.99  # a sweep that gains less is the last one


def small_basis(fractions: PartialFractions) -> ExactMatrix:
    """An invertible matrix P, block diagonal, for which ``P^-1 A P`` has small matrices.

    Parameters
    ----------
    fractions
        The system.
    """
    size = fractions.size
    parts = [_floats(matrix) for matrix in _matrices(fractions)]
    total = sum((abs(part) for part in parts), np.zeros((size, size)))
    exact = flint.fmpq_mat([[int(value != 0) for value in row] for row in total])
    basis = flint.fmpq_mat([[int(i == j) for j in range(size)] for i in range(size)])
    for block in coupled_blocks(exact):
        if not 1 < len(block) <= _LARGEST_BLOCK:
            continue
        found = _small_block([part[np.ix_(block, block)] for part in parts])
        for i, row in zip(block, found, strict=True):
            for j, value in zip(block, row, strict=True):
                basis[i, j] = fmpq(value)
    return basis


def _matrices(fractions: PartialFractions) -> list[ExactMatrix]:
    poles = [part * pole.rows for pole in fractions.poles for parts in pole.columns for part in parts]
    return [*poles, *fractions.polynomial]


def _floats(matrix: ExactMatrix) -> Floats:
    return np.array([[int(v.p) / int(v.q) for v in row] for row in matrix.table()], dtype=np.float64)


def _small_block(parts: list[Floats]) -> list[list[Fraction]]:
    """Column operations of power-of-two size, as long as they lower the largest eigenvalue."""
    size = len(parts[0])
    basis = [[Fraction(int(i == j)) for j in range(size)] for i in range(size)]
    best = _growth(parts)
    for _ in range(_SWEEPS):
        before = best
        for i in range(size):
            for j in range(size):
                if i == j:
                    continue
                weights = perron_weights(_total(parts))
                unit = Fraction(2) ** (frexp(weights[i] / weights[j])[1] - 1)
                for step in _STEPS:
                    factor = step * unit
                    changed = [_operated(part, i, j, float(factor)) for part in parts]
                    growth = _growth(changed)
                    if growth < best * (1 - 1e-6):
                        best, parts = growth, changed
                        for row in basis:
                            row[j] += factor * row[i]
        if best > before * _WORTH:
            break
    return basis


def _total(parts: list[Floats]) -> Floats:
    found: Floats = sum((abs(part) for part in parts), np.zeros_like(parts[0]))
    return found


def _growth(parts: list[Floats]) -> float:
    return float(np.abs(np.linalg.eigvals(_total(parts))).max())


def _operated(part: Floats, i: int, j: int, factor: float) -> Floats:
    """``E^-1 part E`` with E the column operation ``column j += factor column i``."""
    found = part.copy()
    found[:, j] += factor * found[:, i]
    found[i, :] -= factor * found[j, :]
    return found


def in_basis(layers: Layers, basis: ExactMatrix, inverse: ExactMatrix) -> Layers:
    """The system of y with ``J = basis y`` at every order."""
    return Layers(layers.size, tuple(_changed(layer, basis, inverse) for layer in layers.matrices))


def _changed(system: RationalSystem, basis: ExactMatrix, inverse: ExactMatrix) -> RationalSystem:
    size = system.size
    parts = []
    for (i, j), (p, q) in system.entries.items():
        rows = [(k, inverse[k, i]) for k in range(size) if inverse[k, i] != 0]
        columns = [(k, basis[j, k]) for k in range(size) if basis[j, k] != 0]
        parts += [(row, column, p * (a * b), q) for row, a in rows for column, b in columns]
    return rational_system(size, parts)
