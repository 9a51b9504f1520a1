"""The Python interface: the stages of a family as methods, mirroring the commands."""

from __future__ import annotations

import os
from collections.abc import Callable, Iterable, Mapping, Sequence
from fractions import Fraction
from pathlib import Path
from typing import TypeVar

from ibpred.diffeq.system import DifferentialSystem
from ibpred.epsform.form import EpsilonForm, Obstructed
from ibpred.exact.grammar import parse_number
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.iterated.solution import Solution
from ibpred.numerics.value import Value
from ibpred.progress import SILENT, Progress
from ibpred.reduction.masters import Masters
from ibpred.reduction.table import ReductionTable
from ibpred.run.chain import Chain
from ibpred.run.files import read_family_file
from ibpred.run.store import Store
from ibpred.sectors.analysis import SectorAnalysis

R = TypeVar("R")


class Family:
    """A family with its work folder; finished stages are kept there, as the commands keep them.

    Parameters
    ----------
    definition
        The family.
    work
        The work folder.
    workers
        Threads that sample the reduction.
    progress
        Told what is being done; silent by default.

    Notes
    -----
    Every method raises `InputError` for wrong input, `UnfinishedError` where a computation cannot
    finish, and `StoreError` for a work folder that is damaged or in use.
    """

    def __init__(
        self, definition: FamilyDefinition, work: Path, workers: int, progress: Progress = SILENT
    ) -> None:
        self.definition = definition
        self.work = work
        self.workers = workers
        self.progress = progress

    def __repr__(self) -> str:
        return f"Family({self.definition.name}: {self.definition.title})"

    def _with_chain(self, compute: Callable[[Chain], R]) -> R:
        with Store(self.work) as store:
            return compute(Chain(self.definition, store, self.progress, self.workers))

    def sectors(self) -> SectorAnalysis:
        """Zero sectors, classes of equivalent sectors, maps between them."""
        return self._with_chain(lambda chain: chain.analysis())

    def masters(self) -> Masters:
        """The master integrals."""
        return self._with_chain(lambda chain: chain.masters())

    def reduce(self, integrals: Iterable[Sequence[int]]) -> ReductionTable:
        """Integrals, given by their powers, in terms of the masters."""
        wanted: tuple[Powers, ...] = tuple(tuple(int(a) for a in powers) for powers in integrals)
        return self._with_chain(lambda chain: chain.reduction(wanted))

    def differential_equation(self) -> DifferentialSystem:
        """The differential equations of the masters in every invariant."""
        return self._with_chain(lambda chain: chain.derivation().system)

    def epsilon_form(self) -> EpsilonForm | Obstructed:
        """The epsilon-factorised form in dimensionless ratios, or what stands in its way."""
        return self._with_chain(lambda chain: chain.epsilon_form())

    def solve(self, weight: int | None = None) -> Solution:
        """The canonical functions in iterated integrals; through weight 2 L by default."""
        highest = 2 * len(self.definition.loops) if weight is None else weight
        return self._with_chain(lambda chain: chain.solution(chain.order_of_weight(highest)))

    def evaluate(
        self,
        point: Mapping[str, int | str | Fraction],
        integrals: Iterable[Sequence[int]] = (),
        digits: int = 30,
        order: int = 0,
    ) -> tuple[Value, ...]:
        """Values at a point, of the masters or of given integrals, through ``eps^order``.

        Parameters
        ----------
        point
            Exact values of all invariants: integers, fractions, or text such as ``"-1/3"``.
        integrals
            Powers; the masters where none is given.
        digits
            Digits wanted of every coefficient.
        order
            Highest power of eps.
        """
        exact = {k: parse_number(v) if isinstance(v, str) else Fraction(v) for k, v in point.items()}
        wanted: tuple[Powers, ...] = tuple(tuple(int(a) for a in powers) for powers in integrals)
        return self._with_chain(lambda chain: chain.evaluate(exact, wanted, order, digits))


def load(
    path: str | os.PathLike[str],
    work: str | os.PathLike[str] | None = None,
    workers: int | None = None,
) -> Family:
    """Read a family file.

    Parameters
    ----------
    path
        The family file.
    work
        Work folder; by default ``.ibpred/NAME`` beside the file.
    workers
        Threads that sample the reduction; all processors by default.

    Raises
    ------
    InputError
        If the file cannot be read or what is in it is wrong.
    """
    file = Path(path)
    definition = read_family_file(file)
    folder = Path(work) if work is not None else file.parent / ".ibpred" / definition.name
    return Family(definition, folder, workers or os.cpu_count() or 1)
