"""The chain: each stage computed once, kept in the store, and read by the next."""

from __future__ import annotations

from collections.abc import Callable
from typing import TypeVar

import ibpred
from ibpred.digest import digest
from ibpred.exact.codec import from_data, to_data
from ibpred.exact.primes import first_primes
from ibpred.family.definition import FamilyDefinition
from ibpred.progress import Progress
from ibpred.reduction.masters import Masters, find_masters
from ibpred.run.store import Store
from ibpred.sectors.analysis import SectorAnalysis, analyse

SEED = 20_260_301
"""Seed of every random choice of a run, so that the same input gives the same bytes."""

R = TypeVar("R")


class Chain:
    """The stages of one family, each computed when first asked for and kept in the store.

    Parameters
    ----------
    definition
        The family.
    store
        Where finished stages are kept.
    progress
        Told what is being done.
    workers
        Threads that sample the reduction.
    """

    def __init__(self, definition: FamilyDefinition, store: Store, progress: Progress, workers: int) -> None:
        self.definition = definition
        self.store = store
        self.progress = progress
        self.workers = workers
        self.identity = digest(["family", ibpred.__version__, to_data(definition)])
        self._analysis: SectorAnalysis | None = None

    def _kept(self, stage: str, kind: type[R], options: object, compute: Callable[[], R]) -> R:
        key = digest([self.identity, stage, to_data(options)])
        stored = self.store.get(key)
        if stored is not None:
            return from_data(kind, stored)
        result = compute()
        self.store.put(key, stage, to_data(result))
        return result

    def analysis(self) -> SectorAnalysis:
        """Sectors, symmetries, zero sectors."""
        if self._analysis is None:
            self.progress.stage("sectors")
            self._analysis = analyse(self.definition)
        return self._analysis

    def masters(self) -> Masters:
        """The master integrals."""
        (prime,) = first_primes(1)
        return self._kept(
            "masters",
            Masters,
            None,
            lambda: find_masters(self.definition, self.analysis(), prime, SEED, progress=self.progress),
        )
