"""Stages that are computed once and kept in the store."""

from __future__ import annotations

from collections.abc import Callable
from typing import TypeVar

from ibpred.digest import digest
from ibpred.exact.codec import from_data, to_data
from ibpred.exact.primes import first_primes
from ibpred.progress import Expired, Limited, Progress, never
from ibpred.run.storage.deck import Meter, StoredDeck, StoredNotes
from ibpred.run.storage.store import Store
from ibpred.run.workers.local import Threads, Workers

SEED = 20_260_301
"""Seed of every random choice of a run, so that the same input gives the same bytes."""

PRIMES = 60
"""Engine primes a run may use."""

R = TypeVar("R")


class Stages:
    """What is being computed, and where finished stages are kept.

    Parameters
    ----------
    identity
        Digest of all that the stages depend on.
    store
        Where finished stages are kept.
    progress
        Told what is being done.
    workers
        Who replays the tapes; a number of threads of this process.
    expired
        The deadline: a stage that reports progress after it is stopped with an `OutOfTimeError`.

    Attributes
    ----------
    finished
        Names of the stages whose results are at hand, in the order of use.
    watcher
        The progress without the deadline.
    """

    def __init__(
        self,
        identity: str,
        store: Store,
        progress: Progress,
        workers: int | Workers,
        expired: Expired = never,
    ) -> None:
        self.identity = identity
        self.store = store
        self.watcher = progress
        self.expired = expired
        self.progress: Progress = Limited(progress, expired)
        self.finished: list[str] = []
        self.workers: Workers = Threads(workers) if isinstance(workers, int) else workers
        self.meter = Meter()
        self.deck = StoredDeck(store, self.workers, self.meter)
        self.primes = first_primes(PRIMES)

    def kept(self, stage: str, kind: type[R], options: object, compute: Callable[[], R]) -> R:
        key = digest([self.identity, stage, to_data(options)])
        stored = self.store.get(key)
        if stored is not None:
            self.finished.append(stage)
            return from_data(kind, stored)

        def put(result: R) -> None:
            self.store.put(key, stage, to_data(result))

        result = self._stored(key, compute, put)
        self.finished.append(stage)
        return result

    def _notes(self, name: str) -> StoredNotes:
        """Where parts of an unfinished stage are noted."""
        return StoredNotes(digest([self.identity, name]), self.deck)

    def _stored(self, key: str, compute: Callable[[], R], put: Callable[[R], None]) -> R:
        """Compute a result and store it; the pieces of work that led to it are kept until then."""
        with self.deck.working_for(key):
            result = compute()
        with self.store.transaction():
            put(result)
            self.store.forget_work(key)
        return result
