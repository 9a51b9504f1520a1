"""The differential system order by order in eps, for integrals given by their Laurent coefficients.

``J_i = eps^(r_i) I_i`` with the smallest non-negative integers r for which ``dJ/dv = A_v J`` has no pole at
eps = 0. With ``A_v = sum_j eps^j A_v,j`` the Laurent coefficients of J obey the closed system
``dJ^(k)/dv = sum_{j >= 0} A_v,j J^(k-j)``.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

import flint

from ibpred.diffeq.system import DifferentialSystem, SparseMatrix
from ibpred.errors import UnfinishedError
from ibpred.exact.rational import Rational, Ring, ring
from ibpred.numerics.frobenius.layers import Layers
from ibpred.numerics.frobenius.system import Univariate, fmpq, rational_system, system_in


@dataclass(frozen=True)
class ExpandedSystem:
    """``dJ^(k)/dv = sum_j matrices[v][j] J^(k-j)``, ``J_i = eps^shifts[i] I_i``.

    Attributes
    ----------
    variables
        The invariants.
    ring
        Q(invariants).
    shifts
        r_i >= 0.
    matrices
        For every invariant the coefficients of eps^0, eps^1, ... as far as they were asked for.
    """

    variables: tuple[str, ...]
    ring: Ring
    shifts: tuple[int, ...]
    matrices: Mapping[str, tuple[SparseMatrix, ...]]


def in_epsilon(system: DifferentialSystem) -> Mapping[str, SparseMatrix]:
    """The matrices in Q(eps, invariants), ``d = d0 - 2 eps`` put in exactly."""
    target = ring(("eps", *system.variables))
    images: dict[str, Rational] = {name: target.variable(name) for name in system.variables}
    images["d"] = target.variable("eps") * -2 + system.dimension
    return {
        name: tuple((row, column, value.substitute(images)) for row, column, value in system.matrices[name])
        for name in system.variables
    }


def expanded_system(system: DifferentialSystem, count: int) -> ExpandedSystem:
    """The system through ``eps^(count-1)``.

    Raises
    ------
    UnfinishedError
        If no rescaling by powers of eps removes the poles at eps = 0.
    """
    matrices = in_epsilon(system)
    shifts = regular_shifts(system.family, len(system.masters), matrices)
    target = ring(system.variables)
    expanded = {}
    for name, entries in matrices.items():
        layers: list[list[tuple[int, int, Rational]]] = [[] for _ in range(count)]
        for row, column, value in entries:
            scaled = value * value.ring.variable("eps") ** (shifts[row] - shifts[column])
            for order, coefficient in enumerate(_taylor(scaled, target, count)):
                if coefficient:
                    layers[order].append((row, column, coefficient))
        expanded[name] = tuple(tuple(layer) for layer in layers)
    return ExpandedSystem(system.variables, target, shifts, expanded)


def regular_shifts(family: str, size: int, matrices: Mapping[str, SparseMatrix]) -> tuple[int, ...]:
    """The smallest r_i >= 0 such that ``eps^(r_i - r_j) A_ij`` has no pole at eps = 0.

    Raises
    ------
    UnfinishedError
        If there are none.
    """
    poles = [
        (row, column, -_valuation(value))
        for entries in matrices.values()
        for row, column, value in entries
        if value
    ]
    shifts = [0] * size
    for _ in range(size + 1):
        changed = False
        for row, column, pole in poles:
            if shifts[column] + pole > shifts[row]:
                shifts[row] = shifts[column] + pole
                changed = True
        if not changed:
            return tuple(shifts)
    raise UnfinishedError(
        f"{family}: no rescaling of the masters by powers of eps removes the poles of their differential "
        "equations at eps = 0; choose other masters, or work at numeric eps"
    )


def _valuation(value: Rational) -> int:
    place = value.ring.index("eps")
    above = min(int(exponents[place]) for exponents in value.numerator.to_dict())
    below = min(int(exponents[place]) for exponents in value.denominator.to_dict())
    return above - below


def _taylor(value: Rational, target: Ring, count: int) -> list[Rational]:
    """The first coefficients in eps of a function that is regular at eps = 0."""
    above, below = _columns(value, value.numerator, target), _columns(value, value.denominator, target)
    found: list[Rational] = []
    for order in range(count):
        total = above.get(order, target.zero)
        for earlier, coefficient in enumerate(found):
            factor = below.get(order - earlier)
            if coefficient and factor is not None:
                total = total - coefficient * factor
        found.append(total / below[0] if total else total)
    return found


def _columns(value: Rational, polynomial: object, target: Ring) -> dict[int, Rational]:
    """A polynomial by powers of eps, its lowest power in the denominator taken out of both parts."""
    place = value.ring.index("eps")
    lowest = min(int(exponents[place]) for exponents in value.denominator.to_dict())
    layers: dict[int, dict[tuple[int, ...], int]] = {}
    for exponents, coefficient in polynomial.to_dict().items():  # type: ignore[attr-defined]
        powers = tuple(int(e) for e in exponents)
        rest = tuple(e for i, e in enumerate(powers) if i != place)
        layers.setdefault(powers[place] - lowest, {})[rest] = int(coefficient)
    one = target.context.constant(1)
    return {order: Rational(target, target.polynomial(terms), one) for order, terms in layers.items()}


def layers_on_line(
    expanded: ExpandedSystem, start: Mapping[str, Fraction], end: Mapping[str, Fraction]
) -> Layers:
    """The system on the line ``start + x (end - start)``, order by order.

    Raises
    ------
    PointError
        If the whole line is singular.
    """
    size, depth = len(expanded.shifts), len(next(iter(expanded.matrices.values())))
    images = {
        name: flint.fmpq_poly([fmpq(start[name]), fmpq(end[name] - start[name])])
        for name in expanded.variables
    }
    parts: list[list[tuple[int, int, Univariate, Univariate]]] = [[] for _ in range(depth)]
    for name in expanded.variables:
        speed = fmpq(end[name] - start[name])
        if not speed:
            continue
        for order, layer in enumerate(expanded.matrices[name]):
            for (i, j), (p, q) in system_in(size, layer, images).entries.items():
                parts[order].append((i, j, p * speed, q))
    return Layers(size, tuple(rational_system(size, entries) for entries in parts))
