"""The finest block triangular structure of a system."""

from __future__ import annotations

from collections.abc import Sequence

from ibpred.epsform.form import Connection
from ibpred.epsform.matrices import part


def couplings(connection: Connection) -> tuple[tuple[int, ...], ...]:
    """For each row the other rows that occur in its derivatives."""
    size = len(connection.labels)
    return tuple(
        tuple(
            j for j in range(size) if j != i and any(matrix[i][j] for matrix in connection.matrices.values())
        )
        for i in range(size)
    )


def reachable(links: Sequence[Sequence[int]]) -> list[set[int]]:
    """For each row all rows that it depends on, itself included."""
    found = []
    for start in range(len(links)):
        seen, open_rows = {start}, [start]
        while open_rows:
            for j in links[open_rows.pop()]:
                if j not in seen:
                    seen.add(j)
                    open_rows.append(j)
        found.append(seen)
    return found


def coupled_blocks(links: Sequence[Sequence[int]]) -> tuple[tuple[int, ...], ...]:
    """Sets of rows that depend on each other, each after all sets that it depends on.

    Sets are taken in the order of their first rows as far as the dependences allow.
    """
    reach = reachable(links)
    waiting: list[tuple[int, ...]] = []
    for i in range(len(links)):
        block = tuple(j for j in sorted(reach[i]) if i in reach[j])
        if block[0] == i:
            waiting.append(block)
    done: set[int] = set()
    ordered: list[tuple[int, ...]] = []
    while waiting:
        block = next(b for b in waiting if reach[b[0]] <= done | set(b))
        waiting.remove(block)
        done |= set(block)
        ordered.append(block)
    return tuple(ordered)


def restricted(connection: Connection, rows: Sequence[int]) -> Connection:
    """The closed subsystem of some rows."""
    return Connection(
        connection.variables,
        connection.ring,
        {name: part(matrix, rows, rows) for name, matrix in connection.matrices.items()},
        (1,) * len(rows),
        tuple(connection.labels[i] for i in rows),
    )
