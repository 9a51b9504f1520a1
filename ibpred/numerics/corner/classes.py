"""All solutions ``h^(a + b eps) sum_n v_n h^n`` of one class of exponents, exactly in eps.

Where ``a + n + b eps`` is no exponent, v_n follows from those before; where it is one, it may be changed by
eigenvectors, and those before must fit. These are the solutions without logarithms; where there are as many
as the exponents of the class have multiplicity, there are no others.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

import flint

from ibpred.numerics.corner.field import EPS, FIELD, Matrix, echelon, null_space, product, zeros
from ibpred.numerics.corner.system import RaySystem, at_number
from ibpred.numerics.frobenius.system import fmpq

_GENERIC = Fraction(1, 10_007)


@dataclass(frozen=True)
class ClassSolutions:
    """The solutions of one class without logarithms.

    Attributes
    ----------
    power, slope
        a, the least exponent at eps = 0, and b.
    terms
        ``terms[n]`` has v_n of every solution as a column.
    complete
        Whether they are all solutions of the class.
    """

    power: Fraction
    slope: Fraction
    terms: tuple[Matrix, ...]
    complete: bool

    @property
    def count(self) -> int:
        return len(self.terms[0][0])


def class_solutions(
    system: RaySystem, power: Fraction, slope: Fraction, resonances: int
) -> ClassSolutions | None:
    """The solutions of one class without logarithms; None where there are none.

    Parameters
    ----------
    system
        With as many matrices as terms are wanted, at least one more than `resonances`.
    power, slope
        a and b; a is the least exponent modulo the integers at eps = 0.
    resonances
        The largest difference of exponents to a at eps = 0.
    """
    size = system.size
    terms: list[Matrix] = []
    width = 0
    for n in range(len(system.matrices)):
        sources = zeros(size, width)
        for j in range(1, n + 1):
            part = product(system.matrices[j], terms[n - j]) if width else zeros(size, 0)
            sources = [[a + b for a, b in zip(x, y, strict=True)] for x, y in zip(sources, part, strict=True)]
        left = [[-value for value in row] for row in system.matrices[0]]
        for i in range(size):
            left[i][i] = left[i][i] + EPS * slope + (power + n)
        rows, pivots = echelon([[*a, *b] for a, b in zip(left, sources, strict=True)], size)
        conditions = [row[size:] for row in rows[len(pivots) :]]
        if any(value for row in conditions for value in row):
            allowed = null_space(conditions, width)
            terms = [product(matrix, allowed) for matrix in terms]
            rows = [[*row[:size], *product([row[size:]], allowed)[0]] for row in rows]
            width = len(allowed[0])
        free = [c for c in range(size) if c not in pivots]
        here = zeros(size, width + len(free))
        for row, pivot in zip(rows, pivots, strict=False):
            here[pivot][:width] = row[size:]
            for k, c in enumerate(free):
                here[pivot][width + k] = -row[c]
        for k, c in enumerate(free):
            here[c][width + k] = FIELD.one
        terms = [[[*row, *([FIELD.zero] * len(free))] for row in matrix] for matrix in terms]
        terms.append(here)
        width += len(free)
    if not width:
        return None
    complete = width == _multiplicity(system, power, slope, resonances)
    return ClassSolutions(power, slope, tuple(terms), complete)


def _multiplicity(system: RaySystem, power: Fraction, slope: Fraction, resonances: int) -> int:
    """How often the exponents of a class occur, at least: at one rational eps."""
    residue = flint.fmpq_mat([[fmpq(v) for v in row] for row in at_number(system.matrices[0], _GENERIC)])
    roots = {power + n + slope * _GENERIC for n in range(resonances + 1)}
    total = 0
    for factor, count in residue.charpoly().factor()[1]:
        if factor.degree() == 1:
            root = -flint.fmpq(factor[0]) / flint.fmpq(factor[1])
            if Fraction(int(root.p), int(root.q)) in roots:
                total += int(count)
    return total
