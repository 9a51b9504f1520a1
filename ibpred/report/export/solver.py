"""What a numerical solver needs of a family: right-hand sides, boundary values, a path between points."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

from ibpred.errors import InputError
from ibpred.exact.grammar import parse_number
from ibpred.numerics.laurent.expanded import ExpandedSystem, expanded_system, in_epsilon
from ibpred.report.export.material import Data, Material, system_of

Entry = tuple[int, int, int, str]
"""(variable, row, column, text in eps and the invariants)."""


@dataclass(frozen=True)
class BoundaryTable:
    """Laurent coefficients of the masters at a point.

    Attributes
    ----------
    point
        The invariants in order.
    values
        (row, power of eps, real part, imaginary part) as decimal text.
    """

    point: tuple[Fraction, ...]
    values: tuple[tuple[int, int, str, str], ...]


@dataclass(frozen=True)
class SolverParts:
    """Right-hand sides and boundary values.

    Attributes
    ----------
    masters, variables
        Powers of the masters; names of the invariants.
    turns
        For every invariant the direction (+1 or -1, 0 for none) of its imaginary part on a path that keeps
        every line's -i0.
    entries
        Nonzero entries of the matrices at numeric eps.
    layers
        The same order by order: ``layers[j]`` is the coefficient of eps^j of the rescaled system.
    shifts
        The rescaling: ``J_i = eps^shifts[i] I_i`` (see `ibpred.numerics.laurent.expanded`).
    start
        The lowest power of eps of the J_i that is kept.
    tables
        Boundary values, complete from `start` on for as many powers as there are layers.
    """

    masters: tuple[tuple[int, ...], ...]
    variables: tuple[str, ...]
    turns: tuple[int, ...]
    entries: tuple[Entry, ...]
    layers: tuple[tuple[Entry, ...], ...]
    shifts: tuple[int, ...]
    start: int
    tables: tuple[BoundaryTable, ...]


def solver_parts(material: Material) -> SolverParts:
    """Collect what solvers need.

    Raises
    ------
    InputError
        If the family has no invariant, or a table of values lacks a master.
    UnfinishedError
        If the system cannot be expanded in eps.
    """
    if not material.variables:
        raise InputError(
            f"{material.family.name} depends on no invariant, so there is no differential system to solve"
        )
    system = system_of(material)
    tables = tuple(_table(material, data) for data in material.tables)
    shifts = expanded_system(system, 0).shifts
    lowest = [order + shifts[row] for table in tables for row, order, _, _ in table.values]
    start = min(lowest, default=0)
    highest = _highest(tables) + min(shifts) if tables else 2 * len(material.family.loops)
    expanded = expanded_system(system, max(highest - start + 1, 1))
    number = {name: i for i, name in enumerate(system.variables)}
    entries = tuple(
        (number[name], row, column, value.factored_text())
        for name, matrix in in_epsilon(system).items()
        for row, column, value in matrix
        if value
    )
    return SolverParts(
        material.masters,
        material.variables,
        _turns(material),
        entries,
        _layers(expanded),
        shifts,
        start,
        tables,
    )


def _layers(expanded: ExpandedSystem) -> tuple[tuple[Entry, ...], ...]:
    count = len(next(iter(expanded.matrices.values())))
    return tuple(
        tuple(
            (number, row, column, value.factored_text())
            for number, name in enumerate(expanded.variables)
            for row, column, value in expanded.matrices[name][order]
        )
        for order in range(count)
    )


def _turns(material: Material) -> tuple[int, ...]:
    if material.signs is None:
        # no direction is right for all lines: paths stay real, in the region of the points
        return (0,) * len(material.variables)
    return tuple(-material.signs[name] for name in material.variables)


def _highest(tables: tuple[BoundaryTable, ...]) -> int:
    return min(max(order for _, order, _, _ in table.values) for table in tables)


def _table(material: Material, data: Data) -> BoundaryTable:
    point: Mapping[str, str] = data["point"]
    rows = {powers: row for row, powers in enumerate(material.masters)}
    values = []
    seen = set()
    for value in data["integrals"]:
        powers = tuple(int(a) for a in value["powers"])
        if powers not in rows:
            continue
        seen.add(rows[powers])
        for order, part in sorted(value["epsilon"].items(), key=lambda item: int(item[0])):
            values.append((rows[powers], int(order), _decimal(part["re"]), _decimal(part["im"])))
    missing = [powers for powers, row in rows.items() if row not in seen]
    if missing:
        raise InputError(f"the values at {dict(point)} lack the master {missing[0]}")
    try:
        place = tuple(parse_number(point[name]) for name in material.variables)
    except KeyError as error:
        raise InputError(f"a table of values lacks the invariant {error.args[0]!r}") from None
    return BoundaryTable(place, tuple(values))


def _decimal(text: str) -> str:
    """Decimal text, checked; exact digits are cut to what a double holds."""
    try:
        return repr(float(text))
    except ValueError:
        raise InputError(f"{text!r} is no decimal number") from None
