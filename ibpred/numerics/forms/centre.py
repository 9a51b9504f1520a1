"""Centres of local series: a regular point, a letter, or infinity, and what the system is there."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

import flint

from ibpred.balls.context import (
    Ball,
    RealBall,
    complex_ball,
    precision,
    real_ball,
)
from ibpred.errors import PrecisionError
from ibpred.numerics.forms.canonical import CanonicalSystem, SparseRows, sparse_rows
from ibpred.numerics.forms.majorant import Majorant
from ibpred.numerics.forms.root_kernels import Kernel

_SHRUNK = 0.9

BallRows = tuple[tuple[int, tuple[tuple[int, Ball], ...]], ...]


@dataclass(frozen=True)
class Centre:
    """A centre with what the series need of the system there.

    Attributes
    ----------
    size
        Number of functions.
    residue
        A_0; empty at a regular centre.
    others
        (1/d_l as a ball, A_l) for every other letter.
    radius
        Lower bound of min |d_l|; None where there is no other letter.
    majorant
        Bounds of the matrices.
    kernels
        What letters with roots add: the series of ``h dlog`` but for its constant term, and the matrix.
    """

    size: int
    residue: BallRows
    others: tuple[tuple[Ball, BallRows], ...]
    radius: RealBall | None
    majorant: Majorant
    kernels: tuple[tuple[Kernel, BallRows], ...] = ()


@dataclass(frozen=True)
class Place:
    """A point in the disc of a centre.

    Attributes
    ----------
    h
        Local coordinate.
    logarithm
        log h on the branch meant; not used at a regular centre.
    """

    h: Ball
    logarithm: Ball


def centre_at_zero(system: CanonicalSystem, bits: int) -> Centre:
    """The tangential base point x = 0, local coordinate x."""
    return centre_at(system, flint.acb(0), _letter_at_zero(system), bits)


def _letter_at_zero(system: CanonicalSystem) -> int | None:
    for index, letter in enumerate(system.letters):
        if letter.root() == 0:
            return index
    return None


def centre_at(system: CanonicalSystem, centre: Ball, vanishing: int | None, bits: int) -> Centre:
    """A finite centre, local coordinate ``x - centre``.

    Parameters
    ----------
    centre
        Its position.
    vanishing
        Index of the linear letter whose zero it is; None for a regular point.
    bits
        Working precision.
    """
    residue: SparseRows = ()
    places = []
    with precision(bits):
        for index, letter in enumerate(system.letters):
            if index == vanishing:
                residue = letter.rows
                continue
            places += [(root - centre, letter.rows) for root in letter.roots(bits)]
    return centre_with_kernels(system.size, [residue] if residue else [], places, (), bits)


def centre_at_infinity(system: CanonicalSystem, bits: int) -> Centre:
    """The point at infinity, local coordinate ``1/x``."""
    residues = []
    places = []
    with precision(bits):
        for letter in system.letters:
            roots = letter.roots(bits)
            residues += [letter.rows] * len(roots)
            if letter.root() != 0:
                places += [(1 / root, letter.rows) for root in roots]
    negative = [_scaled_rows(rows, -1) for rows in residues]
    return centre_with_kernels(system.size, negative, places, (), bits)


def _scaled_rows(rows: SparseRows, factor: int) -> SparseRows:
    return tuple((i, tuple((j, factor * value) for j, value in entries)) for i, entries in rows)


def _summed(size: int, matrices: Sequence[SparseRows]) -> SparseRows:
    dense = [[Fraction(0)] * size for _ in range(size)]
    for rows in matrices:
        for i, entries in rows:
            for j, value in entries:
                dense[i][j] += value
    return sparse_rows(dense)


def _ball_rows(rows: SparseRows, bits: int) -> BallRows:
    return tuple((i, tuple((j, complex_ball(v, 0, bits)) for j, v in entries)) for i, entries in rows)


def centre_with_kernels(
    size: int,
    residues: Sequence[SparseRows],
    places: Sequence[tuple[Ball, SparseRows]],
    kernels: Sequence[tuple[Kernel, SparseRows]],
    bits: int,
) -> Centre:
    """A centre from what is near it.

    Parameters
    ----------
    size
        Number of functions.
    residues
        Matrices whose sum is the residue.
    places
        (d, matrix) of every other zero of a letter.
    kernels
        Letters with roots and their matrices.
    bits
        Working precision.
    """
    residue = _summed(size, residues)
    with precision(64):
        distances = [distance for distance, _ in places]
        distances += [1 / inverse for kernel, _ in kernels for inverse, _ in kernel.factors]
        radius = _smallest(distances, bits)
        kernels = [item for item in kernels if not item[0].is_constant()]
        if kernels:
            # their coefficients fall like radius^-m only on a smaller disc
            radius = flint.arb(1) if radius is None else flint.arb((radius * _SHRUNK).lower())
        bounds: dict[int, dict[int, RealBall]] = {}
        for distance, rows in places:
            weight = (radius / distance.abs_lower()).upper()
            for i, entries in rows:
                line = bounds.setdefault(i, {})
                for j, value in entries:
                    line[j] = line.get(j, flint.arb(0)) + weight * real_ball(abs(value), 64)
        for kernel, rows in kernels:
            weight = kernel.bound(radius)
            for i, entries in rows:
                line = bounds.setdefault(i, {})
                for j, value in entries:
                    line[j] = line.get(j, flint.arb(0)) + weight * real_ball(abs(value), 64)
    with precision(bits):
        others = tuple((1 / distance, _ball_rows(rows, bits)) for distance, rows in places)
    majorant = Majorant(
        size,
        tuple((i, tuple((j, real_ball(abs(v), 64)) for j, v in entries)) for i, entries in residue),
        tuple((i, tuple(sorted(line.items()))) for i, line in sorted(bounds.items())),
    )
    with_roots = tuple((kernel, _ball_rows(rows, bits)) for kernel, rows in kernels)
    return Centre(size, _ball_rows(residue, bits), others, radius, majorant, with_roots)


def _smallest(distances: Sequence[Ball], bits: int) -> RealBall | None:
    radius: RealBall | None = None
    for distance in distances:
        lower = distance.abs_lower()
        if not lower > 0:
            raise PrecisionError(
                f"a letter cannot be told from the centre of a series at {bits} bits; raise the working "
                "precision"
            )
        radius = lower if radius is None else radius.min(lower)
    return radius
