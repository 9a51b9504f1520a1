"""Tapes, samples and parts of reconstructions kept in the store while a stage is unfinished.

What is lost by a kill is what was computed since the last saving, a few seconds, and the part that
was being computed: one recording, one batch of samples or one image modulo a prime.
"""

from __future__ import annotations

import hashlib
import io
import json
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

import ibpred
from ibpred.digest import canonical_bytes, digest
from ibpred.elimination.tape import Tape
from ibpred.errors import StoreError
from ibpred.exact.codec import from_data, to_data
from ibpred.reduction.deck import Recorded
from ibpred.run.storage.store import Store
from ibpred.run.workers.local import LANES, Samples, Workers, joined, pieces

R = TypeVar("R")

_PIECE_WORK = 2**36  # multiply-adds of one saved batch of samples: seconds on one core
_THREADS_A_PIECE = 8  # more threads than that get several batches at once
_UNSAVED_SECONDS = 5.0  # work that may wait for the next saving
_UNSAVED_BYTES = 2**26
_SECONDS_A_BYTE = 5e-9  # samples that are replayed faster than that are not worth saving


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
class _Piece:
    key: str
    kind: str
    body: bytes
    packed: bool


class StoredDeck:
    """The deck of a run; see `ibpred.reduction.deck.Deck`.

    Parameters
    ----------
    store
        Where work is kept.
    workers
        Who replays the tapes.
    meter
        Told what was done.
    """

    def __init__(self, store: Store, workers: Workers, meter: Meter) -> None:
        self.store = store
        self.workers = workers
        self.meter = meter
        self._owner: str | None = None
        self._unsaved: list[_Piece] = []
        self._seconds = 0.0

    @contextmanager
    def working_for(self, owner: str) -> Iterator[None]:
        """What is kept inside belongs to an unfinished result."""
        outer, self._owner = self._owner, owner
        try:
            yield
        finally:
            self.save()
            self._owner = outer

    def keep(self, key: str, kind: str, body: bytes, packed: bool, seconds: float) -> None:
        """Keep a piece of work that took some seconds; it is written with the next saving."""
        self._unsaved.append(_Piece(key, kind, body, packed))
        self._seconds += seconds
        if self._seconds > _UNSAVED_SECONDS or sum(len(p.body) for p in self._unsaved) > _UNSAVED_BYTES:
            self.save()

    def save(self) -> None:
        """Write what waits, if it is worth it; what took no time is computed again sooner."""
        pieces_, seconds = self._unsaved, self._seconds
        self._unsaved, self._seconds = [], 0.0
        if seconds < _UNSAVED_SECONDS / 10:
            return
        with self.store.transaction():
            for piece in pieces_:
                self.store.put_bytes(piece.key, piece.kind, piece.body, self._owner, piece.packed)

    def recorded(self, key: str, record: Callable[[], Recorded]) -> Recorded:
        """A tape from the store, or recorded and kept."""
        key = digest(["tape", ibpred.__version__, key])
        stored = self.store.get_bytes(key)
        if stored is not None:
            return _unpacked(stored)
        began = time.perf_counter()
        found = record()
        self.keep(key, "tape", _packed(found), True, time.perf_counter() - began)
        return found

    def sampler(self, tape: Tape) -> StoredSampler:
        """A tape played by the workers, long batches kept."""
        return StoredSampler(tape, tape.digest(), self)

    def notes(self, tape: Tape) -> StoredNotes:
        """Parts of the reconstruction from a tape."""
        return StoredNotes(digest([ibpred.__version__, tape.digest()]), self)


@dataclass(frozen=True)
class StoredNotes:
    """Parts of one reconstruction, kept in the store."""

    identity: str
    deck: StoredDeck

    def kept(self, name: str, kind: type[R], compute: Callable[[], R]) -> R:
        """The record noted under a name, computed and noted if there is none."""
        key = digest(["note", self.identity, name])
        stored = self.deck.store.get(key)
        if stored is not None:
            return from_data(kind, stored)
        began = time.perf_counter()
        found = compute()
        seconds = time.perf_counter() - began
        self.deck.keep(key, name, canonical_bytes(to_data(found)), True, seconds)
        return found


@dataclass(frozen=True)
class StoredSampler:
    """A tape as the black box of a reconstruction.

    Parameters
    ----------
    tape, identity
        The tape and its digest.
    deck
        Who plays it, and where batches that took long are kept.
    """

    tape: Tape
    identity: str
    deck: StoredDeck

    @property
    def variables(self) -> tuple[str, ...]:
        return self.tape.variables

    @property
    def entries(self) -> int:
        return len(self.tape.outputs)

    def __call__(self, points: NDArray[np.uint64], prime: int) -> Samples:
        """Values and good lanes at the points."""
        work = _PIECE_WORK // max(1, self.tape.multiply_adds)
        size = max(LANES, work // LANES * LANES)
        blocks = [points[:, a:b] for a, b in pieces(points.shape[1], size)]
        keys = [self._key(block, prime) for block in blocks]
        found: dict[str, Samples] = {}
        for key, block in zip(keys, blocks, strict=True):
            stored = self.deck.store.get_bytes(key)
            if stored is not None:
                found[key] = self._unpacked(stored, block.shape[1])
        missing = [(key, block) for key, block in zip(keys, blocks, strict=True) if key not in found]
        together = -(-self.deck.workers.width // _THREADS_A_PIECE)
        for a, b in pieces(len(missing), together):
            found.update(self._replayed(missing[a:b], prime))
        return joined([found[key] for key in keys])

    def _key(self, points: NDArray[np.uint64], prime: int) -> str:
        content = hashlib.sha256(np.ascontiguousarray(points, "<u8").tobytes()).hexdigest()
        return digest(["samples", self.identity, prime, content])

    def _replayed(self, blocks: list[tuple[str, NDArray[np.uint64]]], prime: int) -> dict[str, Samples]:
        """Replay some blocks together; keep them one by one, so that their size depends on the tape only."""
        points = np.concatenate([block for _, block in blocks], axis=1)
        began = time.perf_counter()
        values, good = self.deck.workers.replay(self.tape, points, prime)
        seconds = time.perf_counter() - began
        meter = self.deck.meter
        meter.seconds += seconds
        meter.samples += points.shape[1]
        meter.terms += points.shape[1] * self.tape.multiply_adds
        worth = seconds > _SECONDS_A_BYTE * values.nbytes
        found: dict[str, Samples] = {}
        start = 0
        for key, block in blocks:
            lanes = slice(start, start + block.shape[1])
            start = lanes.stop
            part = values[:, lanes], good[lanes]
            found[key] = part
            if worth:
                body = part[0].astype("<u8").tobytes() + part[1].astype(np.uint8).tobytes()
                self.deck.keep(key, "samples", body, False, seconds / len(blocks))
        return found

    def _unpacked(self, body: bytes, count: int) -> Samples:
        size = self.entries * count * 8
        if len(body) != size + count:
            raise StoreError(f"{self.deck.store.path}: stored samples do not fit; delete the work folder")
        values = np.frombuffer(body[:size], "<u8").astype(np.uint64).reshape(self.entries, count)
        return values, np.frombuffer(body[size:], np.uint8).astype(np.bool_)


def _packed(found: Recorded) -> bytes:
    """A recorded tape as bytes: numpy's archive of plain arrays, the rest as JSON in one of them."""
    rest = [found.masters, found.owners, found.names, found.rows, found.columns]
    meta = np.frombuffer(canonical_bytes(to_data(rest)), np.uint8)
    entries = np.array(found.entries, np.int64).reshape(-1, 2)
    target = io.BytesIO()
    arrays = {f"tape_{name}": array for name, array in found.tape.to_arrays().items()}
    np.savez(target, meta=meta, entries=entries, **arrays)  # type: ignore[arg-type]
    return target.getvalue()


def _unpacked(body: bytes) -> Recorded:
    with np.load(io.BytesIO(body), allow_pickle=False) as archive:
        arrays = {name.removeprefix("tape_"): archive[name] for name in archive.files if "tape_" in name}
        masters, owners, names, rows, columns = json.loads(archive["meta"].tobytes())
        entries = tuple((a, b) for a, b in archive["entries"].tolist())
    return Recorded(
        tuple(map(tuple, masters)),
        tuple(owners),
        tuple(names),
        Tape.from_arrays(arrays),
        entries,
        rows,
        columns,
    )
