"""Formal solutions at a regular singular point, exactly over Q.

In the spectral basis of the residue, ``g = x^lambda sum_n x^n sum_k u_nk L^k/k!`` with L = log x solves the
system iff ``(n + lambda - R + D) u_n = sum_j>=1 A_j u_{n-j}``, D the shift ``(D u)_k = u_{k+1}``. Where
n + lambda is no exponent the left side is invertible; where it is one, D can be inverted on the generalised
eigenspace, which raises the power of the logarithm by one and leaves ``exp(N L) v`` free: as many solutions
as the multiplicity. So resonances and Jordan blocks need no case distinctions.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import flint

from ibpred.numerics.frobenius.gauge import Gauge, gauged, simple_pole_gauge
from ibpred.numerics.frobenius.poles import PartialFractions, partial_fractions
from ibpred.numerics.frobenius.spectrum import ExactMatrix, Spectrum, fractional_part, spectrum
from ibpred.numerics.frobenius.system import Entry, RationalSystem, fmpq, valuation


@dataclass(frozen=True)
class SingularPoint:
    """A regular singular (or ordinary) point at zero of the local variable.

    Attributes
    ----------
    size
        Number of functions.
    gauge
        ``f_i = x^gauge[i] (basis g)_i``.
    residue, spectrum
        The residue after the gauge, and its exponents and basis.
    system
        The system after the gauge (in the old basis).
    fractions
        Its partial fractions.
    layers
        Number of equal blocks: more than one for a system of several orders together
        (`ibpred.numerics.frobenius.layers`).
    """

    size: int
    gauge: Gauge
    residue: ExactMatrix
    spectrum: Spectrum
    system: RationalSystem
    fractions: PartialFractions
    layers: int = 1


@dataclass(frozen=True)
class FormalClass:
    """All solutions whose exponents agree modulo the integers, to a finite order.

    Attributes
    ----------
    exponent
        lambda, the least exponent of the class.
    terms
        ``terms[n][k]`` is the matrix of the u_nk in the spectral basis, one column for each solution.
    """

    exponent: Fraction
    terms: tuple[tuple[ExactMatrix, ...], ...]

    @property
    def solutions(self) -> int:
        return int(self.terms[0][0].ncols())

    def combined(self, matrix: ExactMatrix) -> FormalClass:
        """Exact combinations of the solutions, one for each column of the matrix.

        Nearly equal exponents make solutions nearly parallel; combined exactly, nothing is lost to that.
        """
        return FormalClass(
            self.exponent, tuple(tuple(level * matrix for level in levels) for levels in self.terms)
        )


def singular_point(system: RationalSystem, place: str) -> SingularPoint:
    """Analyse zero of the local variable.

    Parameters
    ----------
    system
        In the local variable.
    place
        Name of the point, for messages.

    Raises
    ------
    UnfinishedError
        If the pole cannot be made simple, or exponents are not rational.
    """
    gauge = simple_pole_gauge(system, place)
    simple = gauged(system, gauge)
    residue = flint.fmpq_mat(system.size, system.size)
    for (i, j), (p, q) in simple.entries.items():
        if q[0] == 0:
            residue[i, j] = p[0] / q[1]
    return SingularPoint(
        system.size, gauge, residue, spectrum(residue, place), simple, partial_fractions(simple)
    )


def taylor_matrices(point: SingularPoint, count: int) -> list[ExactMatrix]:
    """``A_1 ... A_count`` of ``x A = R + sum_j A_j x^j`` in the spectral basis."""
    size = point.size
    matrices = [flint.fmpq_mat(size, size) for _ in range(count)]
    for (i, j), entry in point.system.entries.items():
        for n, value in enumerate(_taylor(entry, count + 1)[1:]):
            if value:
                matrices[n][i, j] = value
    basis, inverse = point.spectrum.basis, point.spectrum.inverse
    return [inverse * matrix * basis for matrix in matrices]


def _taylor(entry: Entry, count: int) -> list[Any]:
    """Taylor coefficients of ``x p/q``, which is regular at zero."""
    p, q = entry
    lowest = valuation(q)
    top = p.left_shift(1).right_shift(lowest)
    bottom = q.right_shift(lowest)
    lead = flint.fmpq(bottom[0])
    found: list[Any] = []
    for n in range(count):
        total = flint.fmpq(top[n])
        for i in range(1, min(n, bottom.degree()) + 1):
            total -= flint.fmpq(bottom[i]) * found[n - i]
        found.append(total / lead)
    return found


def resonance(point: SingularPoint, residue_class: Fraction) -> tuple[Fraction, int]:
    """Least exponent of a class, and the largest difference to it inside the class."""
    members = [e for e in point.spectrum.exponents if fractional_part(e) == residue_class]
    return min(members), int(max(members) - min(members))


def formal_class(point: SingularPoint, residue_class: Fraction, count: int) -> FormalClass:
    """The solutions of one class.

    Parameters
    ----------
    point
        The point.
    residue_class
        An exponent modulo the integers.
    count
        Number of terms wanted; at least those up to the last resonance are computed.
    """
    exponents = point.spectrum.exponents
    own = [i for i, e in enumerate(exponents) if fractional_part(e) == residue_class]
    return formal_solutions(point, residue_class, own, count)


def formal_solutions(
    point: SingularPoint, residue_class: Fraction, starts: Sequence[int], count: int
) -> FormalClass:
    """Those solutions of one class that start from given vectors of the spectral basis.

    Parameters
    ----------
    point, residue_class, count
        As in `formal_class`.
    starts
        Numbers of basis vectors whose exponents are in the class: one solution each.
    """
    exponents = point.spectrum.exponents
    base, last = resonance(point, residue_class)
    count = max(count, last + 1)
    steps = [e - base for e in exponents]
    own = {i for i, e in enumerate(exponents) if fractional_part(e) == residue_class}
    matrices = taylor_matrices(point, count - 1)
    nilpotent = point.spectrum.nilpotent
    terms: list[list[ExactMatrix]] = []
    for n in range(count):
        sources = _sources(matrices, terms, n)
        resonant = {i for i in own if steps[i] == n}
        start = {column: i for column, i in enumerate(starts) if i in resonant}
        terms.append(_solved(point.size, len(starts), n, steps, nilpotent, sources, resonant, start))
    return FormalClass(base, tuple(tuple(levels) for levels in terms))


def _sources(matrices: list[ExactMatrix], terms: list[list[ExactMatrix]], n: int) -> list[ExactMatrix]:
    found: list[ExactMatrix] = []
    for j in range(1, n + 1):
        for k, level in enumerate(terms[n - j]):
            part = matrices[j - 1] * level
            if k < len(found):
                found[k] = found[k] + part
            else:
                found.append(part)
    return found


def _solved(
    size: int,
    width: int,
    n: int,
    steps: list[Fraction],
    nilpotent: ExactMatrix,
    sources: list[ExactMatrix],
    resonant: set[int],
    start: dict[int, int],
) -> list[ExactMatrix]:
    """Solve ``(n + lambda - R + D) u = sources`` with the given new solutions."""
    depth = len(sources)
    levels = [flint.fmpq_mat(size, width) for _ in range(depth)]
    plain = [i for i in range(size) if i not in resonant]
    chains = [i for i in plain if any(nilpotent[i, j] != 0 for j in range(size))]
    for k in reversed(range(depth)):
        right = sources[k] - levels[k + 1] if k + 1 < depth else sources[k]
        level = flint.fmpq_mat(size, width)
        for i in plain:
            inverse = 1 / fmpq(n - steps[i])
            for c in range(width):
                if right[i, c] != 0:
                    level[i, c] = right[i, c] * inverse
        if chains:
            level = _with_nilpotent(level, nilpotent, steps, n, chains)
        levels[k] = level
    # on the resonant rows: u_{k+1} = sources_k + N u_k
    if not resonant:
        return levels
    current = flint.fmpq_mat(size, width)
    for column, i in start.items():
        current[i, column] = flint.fmpq(1)
    k = 0
    while True:
        if k == len(levels):
            levels.append(flint.fmpq_mat(size, width))
        for i in resonant:
            for c in range(width):
                levels[k][i, c] = current[i, c]
        following = nilpotent * current
        if k < depth:
            following = following + sources[k]
        for i in plain:
            for c in range(width):
                following[i, c] = flint.fmpq(0)
        k += 1
        if k >= depth and not any(value != 0 for value in following.entries()):
            return levels
        current = following


def _with_nilpotent(
    level: ExactMatrix, nilpotent: ExactMatrix, steps: list[Fraction], n: int, chains: list[int]
) -> ExactMatrix:
    """Solve ``(diag - N) u = diag level`` for the rows with a nilpotent part."""
    size, width = level.nrows(), level.ncols()
    total, part = level, level
    while True:
        product = nilpotent * part
        part = flint.fmpq_mat(size, width)
        for i in chains:
            inverse = 1 / fmpq(n - steps[i])
            for c in range(width):
                part[i, c] = product[i, c] * inverse
        if not any(value != 0 for value in part.entries()):
            return total
        total = total + part
