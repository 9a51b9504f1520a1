"""The Python interface to several families with the same kinematics: common masters, reductions, sums."""

from __future__ import annotations

import os
from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TypeVar

from ibpred.errors import InputError
from ibpred.family.definition import FamilyDefinition
from ibpred.family.members import members_of, read_integral
from ibpred.progress import SILENT, Progress
from ibpred.reduction.several import CommonTable
from ibpred.report.json_common import common_masters_data, common_reduction_data, reduction_entry, sums_data
from ibpred.run.chain.deadline import deadline, told
from ibpred.run.chain.joint import Joint, NamedPowers
from ibpred.run.python.amplitudes import sum_of_text
from ibpred.run.python.family import Family
from ibpred.run.python.results import CommonMastersResult, CommonReductionResult, SumsResult
from ibpred.run.storage.files import read_family_file
from ibpred.run.storage.store import Store

R = TypeVar("R")


@dataclass(frozen=True)
class Families:
    """Families whose masters are shared; iterating gives them one by one.

    Attributes
    ----------
    members
        The families, each with its own work folder.
    work
        The work folder for what they have in common.
    preferred
        Integrals that are to be masters.
    workers, progress, seconds
        As for `Family`; so are the errors that methods raise.
    """

    members: tuple[Family, ...]
    work: Path
    workers: int
    preferred: tuple[NamedPowers, ...] = ()
    progress: Progress = SILENT
    seconds: float | None = None

    def __repr__(self) -> str:
        return f"Families({', '.join(family.definition.name for family in self.members)})"

    def __iter__(self) -> Iterator[Family]:
        return iter(self.members)

    def __getitem__(self, name: str) -> Family:
        for family in self.members:
            if family.definition.name == name:
                return family
        raise KeyError(name)

    def within(self, seconds: float | None) -> Families:
        """The same families, each call of a method allowed so many seconds."""
        return replace(
            self, seconds=seconds, members=tuple(family.within(seconds) for family in self.members)
        )

    def masters(self) -> CommonMastersResult:
        """The common masters."""

        def compute(joint: Joint) -> CommonMastersResult:
            found = joint.masters()
            return CommonMastersResult.of(found, self._first, common_masters_data(joint.members, found))

        return self._with_joint(compute)

    def reduce(self, integrals: Iterable[str]) -> CommonReductionResult:
        """Integrals in terms of the common masters.

        Parameters
        ----------
        integrals
            With their families, ``"box(1,1,1,-1)"``; crossed ones are ``"box.u(1,1,1,-1)"``.
        """
        named = [read_integral(text, "reduce") for text in integrals]

        def compute(joint: Joint) -> CommonReductionResult:
            wanted = tuple(dict.fromkeys(joint.integral(each) for each in named))
            rows = joint.reduction(wanted, by_cuts=False)
            batches = rows.batches(wanted)
            table = CommonTable(
                tuple(member.definition.name for member in joint.members),
                rows.masters,
                {integral: rows.combination(integral) for integral in wanted},
                tuple(item for batch in batches for item in batch.evidence),
                tuple(item for batch in batches for item in batch.effort),
            )
            entries = [reduction_entry(joint.members, rows.masters, i, rows.terms(i)) for i in wanted]
            shown = common_reduction_data(joint.members, rows.masters, entries)
            return CommonReductionResult.of(table, self._first, shown)

        return self._with_joint(compute)

    def reduce_sums(self, sums: Mapping[str, str]) -> SumsResult:
        """Sums of integrals of all the families; see `Family.reduce_sums`."""

        def compute(joint: Joint) -> SumsResult:
            found = joint.sums({name: sum_of_text(text, name, joint.members) for name, text in sums.items()})
            return SumsResult.of(found, self._first, sums_data(joint.members, found))

        return self._with_joint(compute)

    @property
    def _first(self) -> FamilyDefinition:
        return self.members[0].definition

    def _with_joint(self, compute: Callable[[Joint], R]) -> R:
        with Store(self.work) as store:
            definitions = [family.definition for family in self.members]
            joint = Joint(
                definitions, store, self.progress, self.workers, self.preferred, deadline(self.seconds)
            )
            with told(joint):
                return compute(joint)


def load_all(
    paths: Iterable[str | os.PathLike[str]],
    work: str | os.PathLike[str] | None = None,
    workers: int | None = None,
    masters: Iterable[str] = (),
    progress: Progress = SILENT,
) -> Families:
    """Read several family files with the same kinematics.

    Parameters
    ----------
    paths
        The family files.
    work
        Folder of the work folders; by default ``.ibpred`` beside the first file. What the families have in
        common is kept in that of the first one.
    workers
        Threads that sample the reduction; all processors by default.
    masters
        Integrals that are to be masters, with their families: ``"box(1,1,1,1)"``.
    progress
        Told what is being done.

    Raises
    ------
    InputError
        If a file cannot be read, what is in it is wrong, or the families do not fit together.
    """
    files = [Path(path) for path in paths]
    if not files:
        raise InputError("no family file is given")
    definitions = [read_family_file(file) for file in files]
    members_of(definitions)
    base = Path(work) if work is not None else files[0].parent / ".ibpred"
    count = workers or os.cpu_count() or 1
    members = tuple(
        Family(definition, base / definition.name, count, (), progress) for definition in definitions
    )
    preferred = tuple(read_integral(text, "masters") for text in masters)
    return Families(members, members[0].work, count, preferred, progress)
