"""Stages that are computed once and kept in the store."""

from __future__ import annotations

from collections.abc import Callable
from typing import TypeVar

from ibpred.digest import digest
from ibpred.elimination.tape import Tape
from ibpred.exact.codec import from_data, to_data
from ibpred.exact.primes import first_primes
from ibpred.progress import Progress
from ibpred.run.sampling import Meter, StoredSampler
from ibpred.run.store import Store

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
        Threads that sample the reduction.
    """

    def __init__(self, identity: str, store: Store, progress: Progress, workers: int) -> None:
        self.identity = identity
        self.store = store
        self.progress = progress
        self.workers = workers
        self.meter = Meter()
        self.primes = first_primes(PRIMES)

    def _kept(self, stage: str, kind: type[R], options: object, compute: Callable[[], R]) -> R:
        key = digest([self.identity, stage, to_data(options)])
        stored = self.store.get(key)
        if stored is not None:
            return from_data(kind, stored)
        result = compute()
        self.store.put(key, stage, to_data(result))
        return result

    def sampling(self, tape: Tape) -> StoredSampler:
        """How the tapes of this run are sampled."""
        return StoredSampler(tape, self.workers, self.store, self.meter)
