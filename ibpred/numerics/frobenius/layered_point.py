"""A singular point of a system order by order in eps, exactly over Q.

The residue ``R(eps) = R_0 + eps R_1 + ...`` is brought to blocks, one for each eigenvalue of R_0, by a change
of basis that is a series in eps itself: in each block the residue is the eigenvalue plus something nilpotent
in the system of all orders together. So the local solutions are powers with rational exponents and powers of
logarithms, as for any other system (`ibpred.numerics.frobenius.formal`).
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

import flint

from ibpred.numerics.frobenius.formal import FormalClass, SingularPoint, formal_solutions
from ibpred.numerics.frobenius.gauge import conjugated, gauged, pole_gauge
from ibpred.numerics.frobenius.layers import Layers, block_triangular, by_functions, whole_system
from ibpred.numerics.frobenius.poles import partial_fractions
from ibpred.numerics.frobenius.spectrum import ExactMatrix, Spectrum, fractional_part, spectrum
from ibpred.numerics.frobenius.system import RationalSystem, entry_valuation, fmpq


def layered_point(layers: Layers, place: str) -> SingularPoint:
    """Analyse zero of the local variable for all orders together.

    Parameters
    ----------
    layers
        In the local variable.
    place
        Name of the point, for messages.

    Raises
    ------
    UnfinishedError
        If no gauge that is the same at all orders makes the pole simple, or exponents are not rational.
    """
    lowest: dict[tuple[int, int], int] = {}
    for layer in layers.matrices:
        for at, entry in layer.entries.items():
            value = entry_valuation(entry)
            lowest[at] = min(value, lowest.get(at, value))
    gauge = pole_gauge(layers.size, lowest, place)
    first, *others = layers.matrices
    simple = Layers(
        layers.size,
        (gauged(first, gauge), *(conjugated(layer, gauge) for layer in others)),
    )
    residues = [_residue(layer) for layer in simple.matrices]
    whole = whole_system(simple)
    return SingularPoint(
        whole.size,
        gauge * layers.depth,
        block_triangular(residues),
        layered_spectrum(residues, place),
        whole,
        by_functions(partial_fractions(whole)),
        layers.depth,
    )


def _residue(system: RationalSystem) -> ExactMatrix:
    residue = flint.fmpq_mat(system.size, system.size)
    for (i, j), (p, q) in system.entries.items():
        if q[0] == 0:
            residue[i, j] = p[0] / q[1]
    return residue


def layered_spectrum(residues: Sequence[ExactMatrix], place: str) -> Spectrum:
    """The spectral decomposition of ``sum_k eps^k residues[k]`` for all orders together.

    With R X = X D, X = 1 + eps X_1 + ... in the spectral basis of R_0, D has blocks where exponents agree and
    X_k lives between different ones: ``R_0 X_k - X_k R_0 = D_k - (what lower orders give)``.

    Raises
    ------
    UnfinishedError
        If an eigenvalue of R_0 is not rational.
    """
    first = spectrum(residues[0], place)
    size, exponents = residues[0].nrows(), first.exponents
    parts = [first.inverse * residue * first.basis for residue in residues]
    identity = flint.fmpq_mat([[int(i == j) for j in range(size)] for i in range(size)])
    changes, blocks = [identity], [parts[0]]
    for k in range(1, len(residues)):
        rest = flint.fmpq_mat(size, size)
        for j in range(1, k + 1):
            rest = rest + parts[j] * changes[k - j]
            if j < k:
                rest = rest - changes[j] * blocks[k - j]
        inside = flint.fmpq_mat(size, size)
        outside = flint.fmpq_mat(size, size)
        for i in range(size):
            for j in range(size):
                (inside if exponents[i] == exponents[j] else outside)[i, j] = rest[i, j]
        blocks.append(inside)
        changes.append(_between(first, -outside))
    blocks[0] = first.nilpotent
    basis = block_triangular([first.basis * change for change in changes])
    return Spectrum(exponents * len(residues), basis, basis.inv(), block_triangular(blocks))


def _between(first: Spectrum, right: ExactMatrix) -> ExactMatrix:
    """Solve ``R_0 X - X R_0 = right`` between different exponents, in the spectral basis."""
    exponents = first.exponents

    def divided(matrix: ExactMatrix) -> ExactMatrix:
        found = flint.fmpq_mat(len(exponents), len(exponents))
        for i, e in enumerate(exponents):
            for j, f in enumerate(exponents):
                if matrix[i, j] != 0:
                    found[i, j] = matrix[i, j] / fmpq(e - f)
        return found

    total = part = divided(right)
    while any(value != 0 for value in part.entries()):
        part = divided(part * first.nilpotent - first.nilpotent * part)
        total = total + part
    return total


def layered_classes(point: SingularPoint, count: int) -> tuple[FormalClass, ...]:
    """The solutions that start at order eps^0, by classes of exponents modulo the integers.

    Parameters
    ----------
    point
        As `layered_point` gives it.
    count
        Number of terms wanted; at least those up to the last resonance are computed.
    """
    size = point.size // point.layers
    exponents = point.spectrum.exponents[:size]

    def members(residue_class: Fraction) -> list[int]:
        return [i for i, e in enumerate(exponents) if fractional_part(e) == residue_class]

    return tuple(formal_solutions(point, c, members(c), count) for c in point.spectrum.classes())
