"""Recording: the elimination of a pruned system and the back substitution of its wanted columns."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from ibpred.elimination.discovery import Discovery, dependencies, discover, discover_leading
from ibpred.elimination.pruning import Pruned, prune, take_rows
from ibpred.elimination.system import CoefficientTable, SparseSystem
from ibpred.elimination.table import check_points, check_prime, evaluate_plan, plan_table
from ibpred.elimination.tape import Tape
from ibpred.errors import InputError, UnfinishedError
from ibpred.kernels.numbering import INPUT, INVERSE, SUM, UNIT, Bounds, Recorded
from ibpred.kernels.record import record_elimination
from ibpred.kernels.schedule import assign_slots, live_levels
from ibpred.kernels.substitution import needed_rows, substitute_back

SMALLEST_PRIME = 2**31
"""Modulo smaller primes different values would too often be taken for equal ones."""


@dataclass(frozen=True)
class _Values:
    """The numbered values of one recording and where the outputs are."""

    recorded: Recorded
    level: NDArray[np.int32]
    masters: tuple[int, ...]
    outputs: NDArray[np.int32]
    output_node: NDArray[np.int32]

    @property
    def cost(self) -> int:
        """Terms and factors of the live values."""
        live = self.level >= 0
        return int(
            np.diff(self.recorded.start)[live].sum() + np.count_nonzero(self.recorded.scale[live] >= 0)
        )


def second_point(point: Sequence[int], prime: int) -> tuple[int, ...]:
    """Another point, made from the first one by a fixed mixing (splitmix64)."""
    state = 0x5DEECE66D
    mixed = []
    for x in point:
        state = (state + int(x) + 0x9E3779B97F4A7C15) % 2**64
        z = state
        z = (z ^ (z >> 30)) * 0xBF58476D1CE4E5B9 % 2**64
        z = (z ^ (z >> 27)) * 0x94D049BB133111EB % 2**64
        state = z ^ (z >> 31)
        mixed.append(state % prime)
    return tuple(mixed)


def record(system: SparseSystem, wanted: Sequence[int], point: Sequence[int], prime: int) -> Tape:
    """Record how the wanted columns of a system are reduced.

    The system is discovered and pruned at the point, then recorded. Wanted columns and masters of the
    tape are columns of the given system.

    Parameters
    ----------
    system
        The equations.
    wanted
        Columns to be expressed in columns without pivot.
    point
        Values of the table's variables; must be random: an entry that vanishes at it (and at a second
        point made from it) is taken as zero everywhere. Validate with `check_tape` elsewhere.
    prime
        An odd prime below 2**49, large for the same reason.

    Raises
    ------
    InputError
        If the point or the prime does not fit.
    UnfinishedError
        If the point is unlucky.
    """
    return record_pruned(prune(system, discover(system, point, prime), wanted), point, prime)


def record_pruned(pruned: Pruned, point: Sequence[int], prime: int) -> Tape:
    """Record a pruned system; wanted columns and masters are original columns.

    The rows are recorded in their own order and sorted by their largest column, shorter ones first;
    neither always wins, so the smaller tape is kept.

    Raises
    ------
    InputError
        If the point or the prime does not fit.
    UnfinishedError
        If the point is unlucky.
    """
    system = pruned.system
    if prime < SMALLEST_PRIME:
        raise InputError(f"a tape is recorded modulo a prime above {SMALLEST_PRIME}, not modulo {prime}")
    best = _record_rows(system, pruned.wanted, point, prime)
    if system.rows > 1:
        leader, length = system.column[system.start[:-1]], np.diff(system.start)
        ordered = take_rows(system, np.lexsort((length, leader)).astype(np.int32))
        leading = discover_leading(ordered, point, prime)
        _, needed = dependencies(leading, pruned.wanted)
        rows = take_rows(ordered, leading.kept[needed])
        other = _record_rows(rows, pruned.wanted, point, prime)
        if other.cost < best.cost:
            best = other
    return _assemble(system.table, pruned.wanted, best).relabelled(pruned.columns)


def _record_rows(system: SparseSystem, wanted: Sequence[int], point: Sequence[int], prime: int) -> _Values:
    prime = check_prime(prime)
    plan = plan_table(system.table)
    both = np.array([[int(x) % prime for x in point], second_point(point, prime)], np.uint64)
    points = np.ascontiguousarray(both.T).reshape(plan.variables, 2)
    inputs = np.ascontiguousarray(evaluate_plan(plan, check_points(points, plan.variables, prime), prime))
    inputs = _canonical(inputs, prime)
    found = discover_leading(system, point, prime)
    asked = np.array([int(c) for c in wanted], np.int32)
    marked, _ = needed_rows(
        asked, found.pivot, found.pivot_row, found.start, found.column, found.used_start, found.used
    )
    back = substitute_back(
        found.columns,
        marked,
        found.pivot_row,
        found.start,
        found.column,
        found.value,
        float(prime),
    )
    if found.rank != system.rows:
        raise UnfinishedError(
            "the rows to be recorded depend on each other at this point; take another random point"
        )
    pivots = np.zeros(system.columns, np.uint8)
    pivots[found.pivot[marked.astype(np.bool_)]] = 1
    result = record_elimination(
        system.columns,
        system.start,
        system.column,
        system.coefficient,
        inputs,
        pivots,
        _bounds(system, found, marked, back),
        float(prime),
    )
    if not result.lucky:
        raise UnfinishedError("a value vanishes at one of two points; take another random point")
    names: list[tuple[int, int, int]] = []
    for i, c in enumerate(asked):
        k = result.solved_place[c]
        if k < 0:
            names.append((i, int(c), -1))
        else:
            for e in range(result.solved_start[k + 1] - 1, result.solved_start[k] - 1, -1):
                names.append((i, int(result.solved_column[e]), int(result.solved_node[e])))
    masters = tuple(sorted({c for _, c, _ in names}))
    number = {c: k for k, c in enumerate(masters)}
    outputs = np.array([(i, number[c]) for i, c, _ in names], np.int32).reshape(-1, 2)
    nodes = np.array([n for _, _, n in names], np.int32)
    level = live_levels(result.kind, result.scale, result.start, result.left, result.right, nodes[nodes >= 0])
    return _Values(result, level, masters, outputs, nodes)


def _canonical(inputs: NDArray[np.float64], prime: int) -> NDArray[np.float64]:
    half = 0.5 * prime
    moved = np.where(inputs > half, inputs - prime, inputs)
    return np.where(moved < -half, moved + prime, moved)


def _bounds(
    system: SparseSystem, found: Discovery, marked: NDArray[np.uint8], back: tuple[Any, ...]
) -> Bounds:
    place, solved_start, solved_column, _ = back
    entries = len(system.column)
    forward = entries + found.multiply_adds
    marked_rows = marked.astype(np.bool_)
    inside = np.repeat(marked_rows, np.diff(found.start))
    rows = np.repeat(np.arange(found.rank), np.diff(found.start))[inside]
    inner = place[found.column[inside]]
    sizes = np.where(inner >= 0, np.diff(solved_start, append=0)[inner], 1)
    per_row = np.bincount(rows, sizes, minlength=found.rank) if len(rows) else np.zeros(1)
    backward = int(sizes.sum())
    terms = forward + backward
    terms += terms // 5 + 16  # links of chains
    cells = len(found.used) + 2 * found.rank + len(found.column)
    nodes = len(system.table.values) + cells + len(solved_column) + terms // 5 + 16
    items = int(max(per_row.max(initial=0), forward if found.rank else 0)) + 16
    return Bounds(nodes, terms, items, len(found.column) + 1, len(solved_column) + 1)


def _assemble(table: CoefficientTable, wanted: Sequence[int], values: _Values) -> Tape:
    made = values.recorded
    live = np.nonzero(values.level >= 0)[0]
    kind, level = made.kind[live], values.level[live]
    rank = np.where(kind == INPUT, 0, 2 * level + np.where(kind == INVERSE, 1, 2))
    order = live[np.argsort(rank, kind="stable")].astype(np.int32)
    real = values.output_node[values.output_node >= 0]
    slot, slots = assign_slots(order, made.kind, made.scale, made.start, made.left, made.right, real)
    ordered_kind = made.kind[order]
    inputs = order[ordered_kind == INPUT]
    inverses = order[ordered_kind == INVERSE]
    sums = order[ordered_kind == SUM]
    levels = int(values.level[order].max(initial=0)) + 1
    entry, row = _entries(made.start, sums)
    left, right = made.left[entry], made.right[entry]
    unit = left == UNIT
    plan = plan_table(
        CoefficientTable(table.variables, table.exponents, np.asarray(table.values, np.int64)[inputs])
    )
    output_slot = np.full(len(values.output_node), -1, np.int32)
    output_slot[values.output_node >= 0] = slot[real]
    return Tape(
        variables=tuple(table.variables),
        wanted=tuple(int(c) for c in wanted),
        masters=values.masters,
        outputs=values.outputs,
        output_slot=output_slot,
        slots=int(slots),
        blocks=plan.blocks,
        monomial_products=plan.products,
        input_start=plan.start,
        input_monomial=plan.monomial,
        input_value=plan.value,
        level_start=_starts(values.level[sums], levels),
        batch_start=_starts(values.level[inverses], levels),
        inverse_source=slot[made.scale[inverses]],
        inverse_target=slot[inverses],
        target=slot[sums],
        scale=np.where(made.scale[sums] >= 0, slot[made.scale[sums]], -1).astype(np.int32),
        unit_start=_starts(row[unit], len(sums)),
        unit=slot[right[unit]],
        product_start=_starts(row[~unit], len(sums)),
        product=np.stack([slot[left[~unit]], slot[right[~unit]]], axis=1),
    )


def _entries(
    start: NDArray[np.int64], nodes: NDArray[np.int32]
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Places of the terms of the given values, one after the other, and whose they are."""
    length = start[nodes + 1] - start[nodes]
    ends = np.cumsum(length)
    total = int(ends[-1]) if len(ends) else 0
    row = np.repeat(np.arange(len(nodes)), length)
    return np.arange(total) + np.repeat(start[nodes] - (ends - length), length), row


def _starts(group: NDArray[Any], groups: int) -> NDArray[np.int32]:
    starts = np.zeros(groups + 1, np.int32)
    np.cumsum(np.bincount(group, minlength=groups), out=starts[1:])
    return starts
