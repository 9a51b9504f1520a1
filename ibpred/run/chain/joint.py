"""Several families together: common masters, and reductions to them."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import ibpred
from ibpred.digest import digest
from ibpred.errors import InputError
from ibpred.exact.codec import to_data
from ibpred.exact.grammar import nearest
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.family.members import Member, members_of
from ibpred.identities.quantities import Integral
from ibpred.identities.rows import FamilyIdentities, family_identities
from ibpred.identities.seeding import Depth, seeds_of_sector
from ibpred.progress import Expired, Progress, never
from ibpred.reduction.check import TableCheck, check_table
from ibpred.reduction.choice import choose_common_masters
from ibpred.reduction.cuts import reduce_by_cuts
from ibpred.reduction.masters import CommonMasters
from ibpred.reduction.several import reduce_together
from ibpred.reduction.sums import ReducedSums, Sum, reduce_sums
from ibpred.reduction.wanted import check_powers
from ibpred.run.chain.equations import Equations
from ibpred.run.chain.stages import SEED, Stages
from ibpred.run.storage.rows import TableRows, table_rows
from ibpred.run.storage.store import Store
from ibpred.run.workers.local import Workers
from ibpred.sectors.analysis import analyse_together

NamedPowers = tuple[str | None, Powers]
"""Name of a family (``box``, or crossed ``box.u``; None for the only one) and powers."""


class Joint(Stages):
    """Masters and reductions of one or several families with the same kinematics.

    Parameters
    ----------
    definitions
        The families; each comes with the crossings that it declares.
    store, progress, workers
        As for a chain.
    preferred
        Integrals that are to be masters.
    expired
        The deadline; see `ibpred.run.chain.stages.Stages`.

    Raises
    ------
    InputError
        If the families do not fit together; if a preferred integral is of none of them.
    """

    def __init__(
        self,
        definitions: Sequence[FamilyDefinition],
        store: Store,
        progress: Progress,
        workers: int | Workers,
        preferred: Sequence[NamedPowers] = (),
        expired: Expired = never,
    ) -> None:
        identity = digest(
            ["families", ibpred.__version__, to_data(tuple(preferred)), *map(to_data, definitions)]
        )
        super().__init__(identity, store, progress, workers, expired)
        self.members: tuple[Member, ...] = members_of(definitions)
        self.roots = tuple(i for i, member in enumerate(self.members) if member.crossing is None)
        self.preferred = tuple(self.integral(named) for named in preferred)
        self._identities: tuple[FamilyIdentities, ...] | None = None

    def identities(self) -> tuple[FamilyIdentities, ...]:
        """The families, their sectors and their identities."""
        if self._identities is None:
            self.progress.stage("sectors")
            definitions = [member.definition for member in self.members]
            self._identities = family_identities(definitions, analyse_together(definitions))
        return self._identities

    def integral(self, named: NamedPowers) -> Integral:
        """The integral that is meant.

        Raises
        ------
        InputError
            For an unknown family, or a missing name where there are several.
        """
        name, powers = named
        if name is None:
            if len(self.roots) > 1:
                raise InputError(
                    f"there are several families: write {self.members[0].family}(...) for the integral "
                    f"{','.join(map(str, powers))}"
                )
            return 0, powers
        names = [member.definition.name for member in self.members]
        if name not in names:
            raise InputError(f"there is no family or crossed family {name!r}; {nearest(name, names)}")
        return names.index(name), powers

    def integrals_within(self, dots: int, rank: int) -> tuple[Integral, ...]:
        """All integrals of nonzero sectors of the families with at most so many dots and so high a rank."""
        found: list[Integral] = []
        for number in self.roots:
            member = self.identities()[number]
            for sector in member.analysis.nonzero:
                seeds = seeds_of_sector(sector, len(member.family.lines), Depth(dots, rank))
                found += [(number, tuple(row)) for row in seeds.tolist()]
        return tuple(found)

    def masters(self, wanted: Sequence[Integral] = ()) -> CommonMasters:
        """The masters of the families, and of those crossed families that wanted integrals belong to.

        Those of a single family are the ones that its chain uses.
        """
        roots = tuple(sorted({*self.roots, *(number for number, _ in (*wanted, *self.preferred))}))
        if roots == (0,):
            wish = tuple(powers for _, powers in self.preferred)
            family = self.members[0].definition
            chain = Equations(family, self.store, self.watcher, self.workers, wish, self.expired)
            own = chain.masters()
            self.finished += chain.finished
            integrals = tuple((0, powers) for powers in own.masters)
            by_order = tuple((0, powers) for powers in own.by_order)
            return CommonMasters((own.family,), integrals, own.prime, own.point, own.trials, by_order)
        return self.kept(
            "common masters",
            CommonMasters,
            roots,
            lambda: choose_common_masters(
                self.identities(),
                roots,
                self.primes,
                SEED,
                self.preferred,
                self.progress,
                self._notes("common masters"),
            ),
        )

    def rows(self, wanted: Sequence[Integral]) -> TableRows:
        """The reductions known so far to the masters that wanted integrals need.

        Raises
        ------
        InputError
            If an integral does not fit its family.
        """
        for number, powers in wanted:
            check_powers(self.members[number].definition, powers)
        families = [member.definition for member in self.members]
        return table_rows(self.store, families, self.masters(wanted).masters)

    def reduction(self, wanted: Sequence[Integral], by_cuts: bool) -> TableRows:
        """Reduce integrals to the common masters, whole or on one cut after the other.

        Those that are known are not reduced again; the table is the same either way.
        """
        rows = self.rows(wanted)
        missing = rows.missing(tuple(dict.fromkeys(wanted)))
        if missing:
            reduce = reduce_by_cuts if by_cuts else reduce_together
            self._stored(
                digest([rows.collection, to_data(missing), by_cuts]),
                lambda: reduce(
                    self.identities(), missing, rows.masters, self.primes, SEED, self.deck, self.progress
                ),
                rows.put,
            )
        return rows

    def sums(self, sums: Mapping[str, Sum]) -> ReducedSums:
        """Sums of integrals in terms of the common masters."""
        wanted = tuple(integral for terms in sums.values() for integral in terms)
        masters = self.masters(wanted).masters
        return self.kept(
            "sums",
            ReducedSums,
            [to_data(sums), to_data(masters)],
            lambda: reduce_sums(
                self.identities(), sums, masters, self.primes, SEED, self.deck, self.progress
            ),
        )

    def check(self, rows: TableRows, wanted: Sequence[Integral], count: int) -> TableCheck:
        """Check random rows of the table by a fresh elimination; see `ibpred.reduction.check`."""
        return check_table(
            self.identities(),
            rows.masters,
            wanted,
            rows.combination,
            count,
            self.primes[-1],
            SEED + count,
            self.progress,
        )
