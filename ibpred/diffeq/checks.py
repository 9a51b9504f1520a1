"""Exact checks of a differential system: scaling and integrability."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import combinations

from ibpred.diffeq.system import DifferentialSystem, SparseMatrix
from ibpred.exact.rational import Rational, Ring
from ibpred.family.definition import FamilyDefinition
from ibpred.family.units import integral_dimension

Entries = dict[tuple[int, int], Rational]


@dataclass(frozen=True)
class CheckResult:
    """Outcome of a check.

    Attributes
    ----------
    name
        What was checked.
    passed
        Whether it holds.
    detail
        A sentence: what holds, or the first entry that fails.
    """

    name: str
    passed: bool
    detail: str


def check_scaling(system: DifferentialSystem, family: FamilyDefinition) -> CheckResult:
    """``sum_v dim_v v A_v`` is diagonal with the mass dimensions of the masters, exactly in d."""
    ring = system.ring
    total: Entries = {}
    for name, dimension in zip(system.variables, system.dimensions, strict=True):
        for row, column, value in system.matrices.get(name, ()):
            place = (row, column)
            total[place] = total.get(place, ring.zero) + value * ring.variable(name) * dimension
    for row, powers in enumerate(system.masters):
        constant, slope = integral_dimension(family, powers)
        # d = d0 - 2 eps, so eps = (d0 - d) / 2
        weight = (system.dimension - ring.variable("d")) * slope / 2 + constant
        total[row, row] = total.get((row, row), ring.zero) - weight
    for (row, column), value in sorted(total.items()):
        if value:
            return CheckResult(
                "scaling",
                False,
                f"the dimension of master {row + 1} is violated by {value} in column {column + 1}",
            )
    return CheckResult("scaling", True, f"exact for {len(system.masters)} masters")


def check_integrability(system: DifferentialSystem) -> CheckResult:
    """``dA_w/dv - dA_v/dw + A_w A_v - A_v A_w = 0`` for every pair of invariants, exactly in d."""
    pairs = list(combinations(system.variables, 2))
    for v, w in pairs:
        first, second = system.matrices.get(v, ()), system.matrices.get(w, ())
        rest: Entries = {}
        for row, column, value in second:
            _add(rest, (row, column), value.derivative(v), system.ring)
        for row, column, value in first:
            _add(rest, (row, column), -value.derivative(w), system.ring)
        _add_product(rest, second, first, 1, system.ring)
        _add_product(rest, first, second, -1, system.ring)
        for (row, column), value in sorted(rest.items()):
            if value:
                return CheckResult(
                    "integrability",
                    False,
                    f"the derivatives in {v} and {w} do not commute on entry ({row + 1}, {column + 1})",
                )
    return CheckResult("integrability", True, f"exact for {len(pairs)} pairs of invariants")


def check_system(system: DifferentialSystem, family: FamilyDefinition) -> tuple[CheckResult, ...]:
    """All exact checks of a differential system."""
    return check_scaling(system, family), check_integrability(system)


def _add(into: Entries, place: tuple[int, int], value: Rational, ring: Ring) -> None:
    into[place] = into.get(place, ring.zero) + value


def _add_product(into: Entries, left: SparseMatrix, right: SparseMatrix, sign: int, ring: Ring) -> None:
    by_row: dict[int, list[tuple[int, Rational]]] = {}
    for row, column, value in right:
        by_row.setdefault(row, []).append((column, value))
    for row, middle, value in left:
        for column, other in by_row.get(middle, ()):
            _add(into, (row, column), value * other * sign, ring)
