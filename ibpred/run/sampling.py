"""Sampling a tape on several threads, with the samples of long work kept in the store."""

from __future__ import annotations

import hashlib
import time
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ibpred.digest import digest
from ibpred.elimination.replaying import replay
from ibpred.elimination.tape import Tape
from ibpred.errors import StoreError
from ibpred.run.store import Store

Samples = tuple[NDArray[np.uint64], NDArray[np.bool_]]

_LANES = 32  # of the replay's vector registers
_PIECE = 1024  # sample points between two savings
_WORTH_KEEPING = 0.5  # seconds: shorter work is done again rather than stored


@dataclass
class Meter:
    """What sampling took, added up over a run.

    Attributes
    ----------
    seconds
        Wall-clock time of all replays.
    samples
        Sample points replayed (those read from the store not counted).
    terms
        Multiply-adds executed.
    """

    seconds: float = 0.0
    samples: int = 0
    terms: int = 0


@dataclass(frozen=True)
class StoredSampler:
    """A tape as the black box of a reconstruction.

    Parameters
    ----------
    tape
        The tape.
    workers
        Threads that share the sample points; the result does not depend on their number.
    store
        Where batches that took long are kept, so that an interrupted run does not repeat them.
    meter
        Told what was done.
    """

    tape: Tape
    workers: int
    store: Store
    meter: Meter

    @property
    def variables(self) -> tuple[str, ...]:
        return self.tape.variables

    @property
    def entries(self) -> int:
        return len(self.tape.outputs)

    def __call__(self, points: NDArray[np.uint64], prime: int) -> Samples:
        """Values and good lanes at the points."""
        pieces = [self._piece(points[:, a:b], prime) for a, b in _pieces(points.shape[1], _PIECE)]
        return (
            np.concatenate([values for values, _ in pieces], axis=1),
            np.concatenate([good for _, good in pieces]),
        )

    def _piece(self, points: NDArray[np.uint64], prime: int) -> Samples:
        content = hashlib.sha256(np.ascontiguousarray(points, "<u8").tobytes()).hexdigest()
        key = digest(["samples", self.tape.digest(), prime, content])
        stored = self.store.get_bytes(key)
        if stored is not None:
            return self._unpacked(stored, points.shape[1])
        began = time.perf_counter()
        values, good = self._shared(points, prime)
        seconds = time.perf_counter() - began
        self.meter.seconds += seconds
        self.meter.samples += points.shape[1]
        self.meter.terms += points.shape[1] * self.tape.multiply_adds
        if seconds > _WORTH_KEEPING:
            body = values.astype("<u8").tobytes() + good.astype(np.uint8).tobytes()
            self.store.put_bytes(key, "samples", body)
        return values, good

    def _shared(self, points: NDArray[np.uint64], prime: int) -> Samples:
        count = points.shape[1]
        if self.workers == 1 or count <= _LANES:
            return replay(self.tape, points, prime)
        share = -(-count // (self.workers * _LANES)) * _LANES
        with ThreadPoolExecutor(self.workers) as pool:
            parts = list(
                pool.map(lambda ab: replay(self.tape, points[:, ab[0] : ab[1]], prime), _pieces(count, share))
            )
        return np.concatenate([v for v, _ in parts], axis=1), np.concatenate([g for _, g in parts])

    def _unpacked(self, body: bytes, count: int) -> Samples:
        size = self.entries * count * 8
        if len(body) != size + count:
            raise StoreError(f"{self.store.path}: stored samples do not fit; delete the work folder")
        values = np.frombuffer(body[:size], "<u8").astype(np.uint64).reshape(self.entries, count)
        return values, np.frombuffer(body[size:], np.uint8).astype(np.bool_)


def _pieces(count: int, size: int) -> Iterator[tuple[int, int]]:
    for start in range(0, count, size):
        yield start, min(start + size, count)
