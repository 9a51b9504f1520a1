"""Systems for the engine's tests: random banded ones, and one-loop identities built from scratch."""

from __future__ import annotations

from itertools import product

import numpy as np

from ibpred.elimination.system import CoefficientTable, SparseSystem


def make_system(
    variables: tuple[str, ...], rows: list[dict[int, dict[tuple[int, ...], int]]], columns: int
) -> SparseSystem:
    """A system from rows ``{column: {exponents: integer}}``."""
    monomials = sorted({m for row in rows for poly in row.values() for m in poly})
    number: dict[tuple[int, ...], int] = {}
    start, column, coefficient = [0], [], []
    for row in rows:
        for c in sorted(row, reverse=True):
            vector = tuple(row[c].get(m, 0) for m in monomials)
            column.append(c)
            coefficient.append(number.setdefault(vector, len(number)))
        start.append(len(column))
    table = CoefficientTable(
        variables,
        np.array(monomials, np.int64).reshape(len(monomials), len(variables)),
        np.array(list(number), np.int64).reshape(len(number), len(monomials)),
    )
    return SparseSystem(
        columns,
        np.array(start, np.int64),
        np.array(column, np.int32),
        np.array(coefficient, np.int32),
        table,
    )


def random_system(
    seed: int, rows: int, columns: int, width: int, variables: tuple[str, ...] = ("d", "x")
) -> SparseSystem:
    """Rows of at most `width` entries in a band that rises from simple to complicated columns."""
    rng = np.random.default_rng(seed)
    exponents = list(product(range(3), repeat=len(variables)))
    found = []
    for r in range(rows):
        top = max(1, int((r + 1) / rows * columns))
        low = max(0, top - 3 * width)
        size = min(int(rng.integers(1, width + 1)), top - low)
        row = {}
        for c in rng.choice(np.arange(low, top), size, replace=False):
            chosen = rng.choice(len(exponents), int(rng.integers(1, 3)), replace=False)
            row[int(c)] = {exponents[m]: int(rng.choice([-3, -2, -1, 1, 1, 2, 5])) for m in chosen}
        found.append(row)
    return make_system(variables, found, columns)


def massive_bubble(powers: int) -> tuple[SparseSystem, dict[tuple[int, int], int]]:
    """Identities of the one-loop bubble with two lines of mass one, p^2 = s, all powers up to a bound.

    From d/dk.k and d/dk.p on ``1/((1 - k^2)^a (1 - (k+p)^2)^b)`` by hand, with
    2 k.p = D1 - D2 - s and k^2 = 1 - D1::

        (d - 2a - b) I(a,b) + 2a I(a+1,b) + b (2 - s) I(a,b+1) - b I(a-1,b+1) = 0

    and the mirror image a <-> b. The masters are the tadpole I(0,1) and the bubble I(1,1); the tadpoles
    I(0,b) = I(b,0) and their own identities ``(d - 2a) I(a,0) + 2a I(a+1,0) = 0`` are part.
    """
    integrals = [(a, b) for a in range(powers + 2) for b in range(powers + 2) if a or b]
    integrals.sort(key=lambda i: ((i[0] > 0) + (i[1] > 0), i[0] + i[1], i))
    place = {i: k for k, i in enumerate(integrals)}
    one, d, s = (0, 0), (1, 0), (0, 1)
    rows = []

    def write(entries: dict[tuple[int, int], dict[tuple[int, int], int]]) -> None:
        rows.append({place[i]: poly for i, poly in entries.items()})

    for a in range(1, powers + 1):
        write({(a, 0): {d: 1, one: -2 * a}, (a + 1, 0): {one: 2 * a}})
        write({(0, a): {one: 1}, (a, 0): {one: -1}})
    for total in range(2, 2 * powers + 1):
        for a in range(max(1, total - powers), min(powers, total - 1) + 1):
            b = total - a
            for mirrored in (False, True):
                x, y = (b, a) if mirrored else (a, b)

                def name(i: int, j: int, mirrored: bool = mirrored) -> tuple[int, int]:
                    return (j, i) if mirrored else (i, j)

                write(
                    {
                        name(x, y): {d: 1, one: -2 * x - y},
                        name(x + 1, y): {one: 2 * x},
                        name(x, y + 1): {one: 2 * y, s: -y},
                        name(x - 1, y + 1): {one: -y},
                    }
                )
    return make_system(("d", "s"), rows, len(integrals)), place


def dictionaries(system: SparseSystem, values: list[int]) -> list[dict[int, int]]:
    """Rows as dictionaries, given the values of the coefficients."""
    found = []
    for r in range(system.rows):
        part = slice(int(system.start[r]), int(system.start[r + 1]))
        pairs = zip(system.column[part].tolist(), system.coefficient[part].tolist(), strict=True)
        found.append({c: values[k] for c, k in pairs})
    return found
