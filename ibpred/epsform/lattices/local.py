"""The lattice at one point: pole of order one, exponents proportional to eps.

A lattice is spanned by the columns of a basis over the power series at the point. It is first saturated
until the system has a pole of order one there (Gérard, Levelt, Ann. Inst. Fourier 23 (1973) 157), then
its generalised eigenspaces are moved by integer powers until the exponents ``a + b eps`` have a = 0. For
generic eps the resulting lattice is unique, so the order of the steps is immaterial.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from enum import Enum
from fractions import Fraction
from itertools import count
from math import floor, prod

import flint

from ibpred.epsform.blocks import Exponent
from ibpred.epsform.lattices.pencil import (
    Frame,
    ModularMatrix,
    ModularPolynomial,
    Pencil,
    column_space,
    completed,
    kernel,
    leading_matrix,
    pole_order,
    sheared,
    sheared_frame,
)
from ibpred.epsform.lattices.spectrum import Slopes, spectrum


class Trouble(Enum):
    """What can go wrong at a point."""

    IRREGULAR = "irregular"
    EXPONENT = "exponent"
    FRACTION = "fraction"
    MOVING = "moving"
    CONJUGATE = "conjugate"
    BUNDLE = "bundle"
    CONSTANT = "constant"


@dataclass(frozen=True)
class Obstacle:
    """A mathematical obstacle met in one sample; the same in every sample if it is true.

    Attributes
    ----------
    trouble
        Its kind.
    point
        Index of the place, or -1 for infinity or none.
    detail
        What the sentence needs: the fractional exponent, or the splitting type of the bundle.
    exponents
        (index of the place, exponents) for the points seen so far.
    """

    trouble: Trouble
    point: int
    detail: tuple[Fraction, ...]
    exponents: tuple[tuple[int, tuple[Exponent, ...]], ...]


class ObstacleError(Exception):
    """Carries the kind of an obstacle from a single point up to the sample."""

    def __init__(self, trouble: Trouble, detail: tuple[Fraction, ...] = ()) -> None:
        super().__init__(trouble.value)
        self.trouble = trouble
        self.detail = detail


def saturated(pencil: Pencil, frame: Frame, point: int) -> tuple[Pencil, Frame]:
    """Lower the pole at a point to order one.

    Raises
    ------
    ObstacleError
        If the point is irregular.
    """
    order, steps = pole_order(pencil, point), 0
    while order > 1:
        if steps == pencil.size:
            raise ObstacleError(Trouble.IRREGULAR)
        image = column_space(leading_matrix(pencil, point))
        basis = completed(image, pencil.size, pencil.prime)
        pencil = sheared(pencil, basis, len(image), -1, point)
        frame = sheared_frame(frame, basis, len(image), -1, point)
        new = pole_order(pencil, point)
        steps = steps + 1 if new == order else 0
        order = new
    return pencil, frame


def residue_at(pencil: Pencil, point: int) -> ModularMatrix:
    """Residue at a point with a pole of order at most one."""
    if pole_order(pencil, point) == 0:
        return flint.nmod_mat(pencil.size, pencil.size, pencil.prime)
    return leading_matrix(pencil, point)


def _moved(residue: ModularMatrix, factor: ModularPolynomial) -> tuple[ModularMatrix, int]:
    """Basis adapted to the generalised eigenspaces of the roots of a polynomial (first) and of the others."""
    size, prime = residue.nrows(), int(residue.modulus())
    unit = flint.nmod_mat(size, size, [int(i == j) for i in range(size) for j in range(size)], prime)
    value = flint.nmod_mat(size, size, prime)
    for coefficient in reversed(factor.coeffs()):
        value = value * residue + unit * int(coefficient)
    power = unit
    for _ in range(size):
        power = power * value
    moved = kernel(power)
    vectors = [*moved, *column_space(power)]
    return flint.nmod_mat(size, size, [e for v in vectors for e in v], prime).transpose(), len(moved)


def normalised(
    pencil: Pencil,
    frame: Frame,
    point: int,
    eps: int,
    slopes: Slopes | None,
    rounded: Callable[[Fraction], int] = floor,
) -> tuple[Pencil, Frame, tuple[Exponent, ...]]:
    """Bring one point to a simple pole with exponents ``a + b eps``, 0 <= a < 1.

    Parameters
    ----------
    slopes
        The slopes to expect where eps is a given number, None where it is random (see `spectrum`).
    rounded
        `math.floor`, or `math.ceil` for -1 < a <= 0.

    Returns
    -------
    pencil, frame
        In the new basis.
    exponents
        Those of the saturated lattice, before the shifts, sorted, with multiplicity.

    Raises
    ------
    ObstacleError
        If the point is irregular or has exponents that are not linear in eps.
    """
    pencil, frame = saturated(pencil, frame, point)
    first: tuple[Exponent, ...] = ()
    for step in count():
        residue = residue_at(pencil, point)
        eigenvalues = spectrum(residue.charpoly(), eps, slopes)
        if eigenvalues is None:
            raise ObstacleError(Trouble.EXPONENT)
        if step == 0:
            first = tuple(sorted(e.exponent for e in eigenvalues for _ in range(e.multiplicity)))
        for power in (1, -1):
            moving = [e.factor for e in eigenvalues if rounded(e.exponent.shift) * power > 0]
            if moving:
                basis, moved = _moved(residue, prod(moving))
                pencil = sheared(pencil, basis, moved, power, point)
                frame = sheared_frame(frame, basis, moved, power, point)
                break
        else:
            return pencil, frame, first
    raise AssertionError("unreachable")
