"""The stages of one family from its definition to its differential equations."""

from __future__ import annotations

import ibpred
from ibpred.diffeq.derive import Derivation, differential_system
from ibpred.digest import digest
from ibpred.exact.codec import to_data
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.identities.rows import family_identities
from ibpred.progress import Expired, Progress, never
from ibpred.reduction.choice import choose_masters
from ibpred.reduction.independent import SectorCount, compare_counts
from ibpred.reduction.masters import Masters
from ibpred.reduction.several import reduce_together
from ibpred.reduction.table import ReductionTable
from ibpred.reduction.wanted import check_powers
from ibpred.report.text import integral_text
from ibpred.run.chain.records import Counts
from ibpred.run.chain.stages import SEED, Stages
from ibpred.run.storage.rows import table_rows
from ibpred.run.storage.store import Store
from ibpred.run.workers.local import Workers
from ibpred.sectors.analysis import SectorAnalysis, analyse


class Equations(Stages):
    """Sectors, masters, reductions and differential equations, each computed when first asked for.

    Parameters
    ----------
    definition
        The family.
    store
        Where finished stages are kept.
    progress
        Told what is being done.
    workers
        Who samples the reduction; a number of threads.
    preferred
        Integrals that are to be masters; in the other sectors masters are chosen.
    expired
        The deadline; see `ibpred.run.chain.stages.Stages`.
    """

    def __init__(
        self,
        definition: FamilyDefinition,
        store: Store,
        progress: Progress,
        workers: int | Workers,
        preferred: tuple[Powers, ...] = (),
        expired: Expired = never,
    ) -> None:
        identity = digest(["family", ibpred.__version__, to_data(definition), preferred])
        super().__init__(identity, store, progress, workers, expired)
        self.definition = definition
        self.preferred = preferred
        self._analysis: SectorAnalysis | None = None

    def analysis(self) -> SectorAnalysis:
        """Sectors, symmetries, zero sectors."""
        if self._analysis is None:
            self.progress.stage("sectors")
            self._analysis = analyse(self.definition)
        return self._analysis

    def masters(self) -> Masters:
        """The master integrals."""
        return self.kept(
            "masters",
            Masters,
            None,
            lambda: choose_masters(
                self.definition,
                self.analysis(),
                self.primes,
                SEED,
                self.preferred,
                self.progress,
                self._notes("masters"),
            ),
        )

    def counts(self) -> tuple[SectorCount, ...]:
        """The masters of each sector beside its critical points."""
        masters = self.masters().masters
        return self.kept(
            "counts",
            Counts,
            None,
            lambda: Counts(
                compare_counts(self.definition, self.analysis(), masters, self.primes[0], SEED, self.progress)
            ),
        ).sectors

    def reduction(self, wanted: tuple[Powers, ...]) -> ReductionTable:
        """Integrals in terms of the masters."""
        for powers in wanted:
            check_powers(self.definition, powers)
        masters = tuple((0, powers) for powers in self.masters().masters)
        rows = table_rows(self.store, [self.definition], masters)
        asked = [(0, powers) for powers in wanted]
        missing = rows.missing(asked)
        if missing:
            self._stored(
                digest([rows.collection, to_data(missing)]),
                lambda: reduce_together(
                    family_identities([self.definition], [self.analysis()]),
                    missing,
                    masters,
                    self.primes,
                    SEED,
                    self.deck,
                    self.progress,
                ),
                rows.put,
            )
        batches = rows.batches(asked)
        return ReductionTable(
            self.definition.name,
            tuple(powers for _, powers in masters),
            {powers: rows.combination((0, powers)) for powers in wanted},
            tuple(item for batch in batches for item in batch.evidence),
            tuple(item for batch in batches for item in batch.effort),
        )

    def derivation(self) -> Derivation:
        """The differential equations of the masters, with their evidence."""
        masters = self.masters().masters
        return self.kept(
            "differential equation",
            Derivation,
            None,
            lambda: differential_system(
                self.definition,
                self.analysis(),
                masters,
                self.primes,
                SEED,
                self.deck,
                self.progress,
            ),
        )

    def label(self, row: int) -> str:
        """A master by name."""
        return integral_text(self.definition.name, self.masters().masters[row])
