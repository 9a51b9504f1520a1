"""Slow twins of the kernels in plain Python: the reference that tests compare with."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

Row = dict[int, int]


def eliminate_plain(rows: Sequence[Mapping[int, int]], prime: int) -> tuple[list[int], dict[int, Row]]:
    """Eliminate rows ``sum_c row[c] * x_c = 0`` modulo a prime in the given order.

    Returns
    -------
    kept
        Numbers of the independent rows.
    solved
        pivot column -> ``{column: value}`` with ``x_pivot = sum value * x_column`` over columns without
        pivot.
    """
    kept: list[int] = []
    reduced: dict[int, Row] = {}
    for number, given in enumerate(rows):
        row = {c: v % prime for c, v in given.items() if v % prime}
        while row:
            hit = max((c for c in row if c in reduced), default=None)
            if hit is None:
                break
            value = row.pop(hit)
            _add(row, reduced[hit], value, prime)
        if row:
            pivot = max(row)
            scale = -pow(row.pop(pivot), -1, prime)
            reduced[pivot] = {c: v * scale % prime for c, v in row.items()}
            kept.append(number)
    solved: dict[int, Row] = {}
    for pivot in sorted(reduced):
        row = {}
        for c, v in reduced[pivot].items():
            _add(row, solved.get(c, {c: 1}), v, prime)
        solved[pivot] = row
    return kept, solved


def _add(row: Row, other: Mapping[int, int], factor: int, prime: int) -> None:
    for c, v in other.items():
        total = (row.get(c, 0) + factor * v) % prime
        if total:
            row[c] = total
        else:
            row.pop(c, None)


def evaluate_plain(
    exponents: Sequence[Sequence[int]],
    values: Sequence[Sequence[int]],
    point: Sequence[int],
    prime: int,
) -> list[int]:
    """Values of integer polynomials at a point modulo a prime."""
    monomials = []
    for row in exponents:
        monomial = 1
        for x, e in zip(point, row, strict=True):
            monomial = monomial * pow(int(x), int(e), prime) % prime
        monomials.append(monomial)
    return [sum(int(v) * m for v, m in zip(row, monomials, strict=True)) % prime for row in values]


def replay_plain(tape: Any, point: Sequence[int], prime: int) -> list[int] | None:
    """Outputs of a tape at one point, step by step with Python integers; None where a pivot vanishes."""
    scratch: dict[int, int] = {v: int(x) % prime for v, x in enumerate(point)}
    scratch[len(point)] = 1
    for goal, left, right in tape.monomial_products.tolist():
        scratch[goal] = scratch[left] * scratch[right] % prime
    slots: dict[int, int] = {}
    starts = tape.input_start.tolist()
    for c in range(len(starts) - 1):
        part = slice(starts[c], starts[c + 1])
        pairs = zip(tape.input_monomial[part].tolist(), tape.input_value[part].tolist(), strict=True)
        slots[c] = sum(scratch[m] * v for m, v in pairs) % prime
    for level in range(len(tape.level_start) - 1):
        batch = range(tape.batch_start[level], tape.batch_start[level + 1])
        sources = [slots[int(tape.inverse_source[i])] for i in batch]
        if 0 in sources:
            return None
        for i, source in zip(batch, sources, strict=True):
            slots[int(tape.inverse_target[i])] = -pow(source, -1, prime) % prime
        for k in range(tape.level_start[level], tape.level_start[level + 1]):
            total = sum(slots[int(u)] for u in tape.unit[tape.unit_start[k] : tape.unit_start[k + 1]])
            for x, y in tape.product[tape.product_start[k] : tape.product_start[k + 1]].tolist():
                total += slots[x] * slots[y]
            if tape.scale[k] >= 0:
                total *= slots[int(tape.scale[k])]
            slots[int(tape.target[k])] = total % prime
    return [1 if s < 0 else slots[s] for s in tape.output_slot.tolist()]
