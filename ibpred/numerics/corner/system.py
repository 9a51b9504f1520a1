"""The system on a ray near its start, exactly in eps: ``h dg/dh = sum_n A_n(eps) h^n g``."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

from ibpred.diffeq.system import DifferentialSystem
from ibpred.errors import PointError, UnfinishedError
from ibpred.exact.rational import Polynomial, Rational
from ibpred.numerics.corner.field import FIELD, Matrix, zeros
from ibpred.numerics.laurent.distance import DISTANCE
from ibpred.numerics.laurent.expanded import in_epsilon


@dataclass(frozen=True)
class RaySystem:
    """``h dg/dh = sum_n matrices[n] h^n g`` with ``I_i = h^gauge[i] g_i``.

    Attributes
    ----------
    gauge
        Integers that make the pole simple.
    matrices
        A_0 (the residue), A_1, ..., over Q(eps).
    """

    gauge: tuple[int, ...]
    matrices: tuple[Matrix, ...]

    @property
    def size(self) -> int:
        return len(self.gauge)


def ray_system(
    system: DifferentialSystem,
    images: Mapping[str, Rational],
    gauge: Sequence[int],
    count: int,
) -> RaySystem:
    """Expand the system of the masters on a ray.

    Parameters
    ----------
    system
        The differential equations.
    images
        The invariants as linear functions of h, in Q(eps, h).
    gauge
        Integers that make the pole simple (see `ibpred.numerics.frobenius.gauge`).
    count
        How many matrices.

    Raises
    ------
    PointError
        If the whole ray is singular.
    UnfinishedError
        If the pole is not simple at generic eps with this gauge.
    """
    size = len(system.masters)
    found = [zeros(size, size) for _ in range(count)]
    values = {**images, "eps": DISTANCE.variable("eps")}
    h = DISTANCE.variable("h")
    total: dict[tuple[int, int], Rational] = {}
    for name, entries in in_epsilon(system).items():
        speed = images[name].derivative("h")
        if not speed:
            continue
        for i, j, value in entries:
            try:
                along = value.substitute(values) * speed
            except ZeroDivisionError:
                raise PointError(f"the ray is singular all along: {value.denominator} vanishes") from None
            total[i, j] = total[i, j] + along if (i, j) in total else along
    for (i, j), value in total.items():
        if value:
            for n, coefficient in _taylor(value * h ** (1 + gauge[j] - gauge[i]), count).items():
                found[n][i][j] = coefficient
    for i, power in enumerate(gauge):
        found[0][i][i] = found[0][i][i] - power
    return RaySystem(tuple(gauge), tuple(found))


def _taylor(value: Rational, count: int) -> dict[int, Rational]:
    """Taylor coefficients in h over Q(eps)."""
    above, below = _by_distance(value.numerator), _by_distance(value.denominator)
    low = min(below)
    start = min(above) - low
    if start < 0:
        raise UnfinishedError("the pole of the differential system is not simple at generic eps")
    found: dict[int, Rational] = {}
    for n in range(start, count):
        total = above.get(n + low, FIELD.zero)
        for earlier, coefficient in found.items():
            factor = below.get(n + low - earlier)
            if factor is not None:
                total = total - coefficient * factor
        found[n] = total / below[low]
    return {n: coefficient for n, coefficient in found.items() if coefficient}


def _by_distance(polynomial: Polynomial) -> dict[int, Rational]:
    layers: dict[int, dict[tuple[int, ...], int]] = {}
    for exponents, coefficient in polynomial.to_dict().items():
        layers.setdefault(int(exponents[1]), {})[(int(exponents[0]),)] = int(coefficient)
    one = FIELD.context.constant(1)
    return {power: Rational(FIELD, FIELD.polynomial(terms), one) for power, terms in layers.items()}


def at_number(matrix: Matrix, eps: Fraction) -> list[list[Fraction]]:
    """A matrix at a rational eps."""
    return [[value.substitute({"eps": eps}).to_fraction() for value in row] for row in matrix]
