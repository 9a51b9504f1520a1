"""Who replays a tape: threads of this process; each block of sample points is one task."""

from __future__ import annotations

from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from ibpred.elimination.replaying import replay
from ibpred.elimination.tape import Tape

Samples = tuple[NDArray[np.uint64], NDArray[np.bool_]]
"""Values (entries, points) and which points are good."""

LANES = 32
"""Sample points that the replay handles at once."""

_SMALL = 2**22  # multiply-adds that are not worth a thread
_BLOCKS = 4  # tasks a worker, so that a slow one holds nobody up


class Workers(Protocol):
    """Replays tapes; the values do not depend on how the work is shared."""

    @property
    def width(self) -> int:
        """Threads that work at once."""
        ...

    def replay(self, tape: Tape, points: NDArray[np.uint64], prime: int) -> Samples:
        """Values and good lanes at points (variables, B)."""
        ...

    def close(self) -> None:
        """Let the workers go."""
        ...


class Threads:
    """Threads that share one tape: the replay runs outside the interpreter's lock.

    Processes would do the same work with a copy of the tape and of its results each.

    Parameters
    ----------
    count
        Number of threads.
    """

    def __init__(self, count: int) -> None:
        self.width = count
        self._pool = ThreadPoolExecutor(count) if count > 1 else None

    def replay(self, tape: Tape, points: NDArray[np.uint64], prime: int) -> Samples:
        """Values and good lanes at the points."""
        count = points.shape[1]
        if self._pool is None or count <= LANES or count * tape.multiply_adds < _SMALL:
            return replay(tape, points, prime)
        size = -(-count // (self.width * _BLOCKS * LANES)) * LANES
        return joined(
            list(
                self._pool.map(lambda ab: replay(tape, points[:, ab[0] : ab[1]], prime), pieces(count, size))
            )
        )

    def close(self) -> None:
        """End the threads."""
        if self._pool is not None:
            self._pool.shutdown(cancel_futures=True)


def pieces(count: int, size: int) -> Iterator[tuple[int, int]]:
    """Begin and end of consecutive pieces."""
    for start in range(0, count, size):
        yield start, min(start + size, count)


def joined(parts: list[Samples]) -> Samples:
    """Samples of consecutive pieces as one."""
    if len(parts) == 1:
        return parts[0]
    return np.concatenate([v for v, _ in parts], axis=1), np.concatenate([g for _, g in parts])
