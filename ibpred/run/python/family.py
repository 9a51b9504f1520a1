"""The Python interface: the stages of a family as methods, mirroring the commands."""

from __future__ import annotations

import os
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from pathlib import Path
from typing import TypeVar

from ibpred.epsform.form import EpsilonForm
from ibpred.errors import InputError
from ibpred.exact.grammar import parse_number
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.family.members import members_of
from ibpred.progress import SILENT, Progress
from ibpred.report.expansions import expansion_data
from ibpred.report.grids import grid_data
from ibpred.report.json_common import common_reduction_data, reduction_entry, sums_data, without_families
from ibpred.report.json_tables import (
    differential_data,
    epsilon_data,
    inspect_data,
    masters_data,
    solution_data,
    values_data,
)
from ibpred.run.chain.chain import Chain
from ibpred.run.chain.deadline import deadline, told
from ibpred.run.chain.joint import Joint, NamedPowers
from ibpred.run.constants.solved import completed_boundary
from ibpred.run.constants.solved import solution as solution_of
from ibpred.run.python.amplitudes import sum_of_text
from ibpred.run.python.results import (
    DifferentialResult,
    ExpansionResult,
    FormResult,
    GridResult,
    GridValues,
    MastersResult,
    NearPoint,
    ObstructedResult,
    PointValues,
    ReductionResult,
    SectorsResult,
    SolutionResult,
    SumsResult,
    ValuesResult,
)
from ibpred.run.storage.files import read_family_file
from ibpred.run.storage.store import Store
from ibpred.run.values.evaluate import evaluate
from ibpred.run.values.expansions import Approach, expand
from ibpred.run.values.grids import Axis, evaluate_grid

R = TypeVar("R")

Number = int | str | Fraction
"""An exact number: an integer, a fraction, or text such as ``"-1/3"``."""


@dataclass(frozen=True)
class Family:
    """A family with its work folder; finished stages are kept there, as the commands keep them.

    Attributes
    ----------
    definition
        The family.
    work
        The work folder.
    workers
        Threads that sample the reduction.
    preferred
        Integrals that are to be masters.
    progress
        Told what is being done; silent by default.
    seconds
        Time allowed for each call of a method; None for as long as it takes.

    Notes
    -----
    Every method raises `InputError` for wrong input, `UnfinishedError` where a computation cannot finish,
    `OutOfTimeError` where the time allowed is over (what is finished is kept, the same call goes on), and
    `StoreError` for a work folder that is damaged or in use.

    The results are immutable records; notebooks draw them, `to_json` and `from_json` keep them.
    """

    definition: FamilyDefinition
    work: Path
    workers: int
    preferred: tuple[Powers, ...] = ()
    progress: Progress = SILENT
    seconds: float | None = None

    def __repr__(self) -> str:
        return f"Family({self.definition.name}: {self.definition.title})"

    def within(self, seconds: float | None) -> Family:
        """The same family, each call of a method allowed so many seconds."""
        return replace(self, seconds=seconds)

    def _with_chain(self, compute: Callable[[Chain], R]) -> R:
        with Store(self.work) as store:
            expired = deadline(self.seconds)
            chain = Chain(self.definition, store, self.progress, self.workers, self.preferred, expired)
            with told(chain):
                return compute(chain)

    def sectors(self) -> SectorsResult:
        """Zero sectors, classes of equivalent sectors, maps between them."""
        found = self._with_chain(lambda chain: chain.analysis())
        return SectorsResult.of(found, self.definition, inspect_data(self.definition, found))

    def masters(self) -> MastersResult:
        """The master integrals."""
        found = self._with_chain(lambda chain: chain.masters())
        return MastersResult.of(found, self.definition, masters_data(self.definition, found))

    def reduce(self, integrals: Iterable[Sequence[int]]) -> ReductionResult:
        """Integrals, given by their powers, in terms of the masters."""
        wanted = _powers(integrals)
        table = self._with_chain(lambda chain: chain.reduction(wanted))
        members = members_of([self.definition])
        masters = [(0, powers) for powers in table.masters]
        entries = [
            reduction_entry(members, masters, (0, powers), [(i, c.factored_text()) for i, c in terms])
            for powers, terms in table.reductions.items()
        ]
        shown = without_families(common_reduction_data(members, masters, entries))
        return ReductionResult.of(table, self.definition, shown)

    def reduce_sums(self, sums: Mapping[str, str]) -> SumsResult:
        """Sums of integrals, such as amplitudes, in terms of the masters.

        Parameters
        ----------
        sums
            Name -> text with lines ``coefficient * integral``, added up, as in the files of `reduce --sum`.
        """
        with Store(self.work) as store:
            wish: list[NamedPowers] = [(None, powers) for powers in self.preferred]
            joint = Joint([self.definition], store, self.progress, self.workers, wish, deadline(self.seconds))
            with told(joint):
                found = joint.sums(
                    {name: sum_of_text(text, name, joint.members) for name, text in sums.items()}
                )
            data = sums_data(joint.members, found)
            crossed = any(joint.members[number].crossing for number, _ in found.masters)
        return SumsResult.of(found, self.definition, data if crossed else without_families(data))

    def differential_equation(self) -> DifferentialResult:
        """The differential equations of the masters in every invariant."""
        system = self._with_chain(lambda chain: chain.derivation().system)
        return DifferentialResult.of(system, self.definition, differential_data(system))

    def epsilon_form(self) -> FormResult | ObstructedResult:
        """The epsilon-factorised form in dimensionless ratios, or what stands in its way."""

        def compute(chain: Chain) -> FormResult | ObstructedResult:
            found = chain.epsilon_form()
            shown = epsilon_data(self.definition, chain.dimensionless(), found, chain.offered())
            if isinstance(found, EpsilonForm):
                return FormResult.of(found, self.definition, shown)
            return ObstructedResult.of(found, self.definition, shown)

        return self._with_chain(compute)

    def solve(self, weight: int | None = None) -> SolutionResult:
        """The canonical functions in iterated integrals; through weight 2 L by default."""
        highest = 2 * len(self.definition.loops) if weight is None else weight

        def compute(chain: Chain) -> SolutionResult:
            order = chain.order_of_weight(highest)
            solution = solution_of(chain, order)
            shown = solution_data(self.definition, completed_boundary(chain, order), solution)
            return SolutionResult.of(solution, self.definition, shown)

        return self._with_chain(compute)

    def evaluate(
        self,
        point: Mapping[str, Number],
        integrals: Iterable[Sequence[int]] = (),
        digits: int = 30,
        order: int = 0,
    ) -> ValuesResult:
        """Values at a point, of the masters or of given integrals, through ``eps^order``.

        Parameters
        ----------
        point
            Exact values of all invariants.
        integrals
            Powers; the masters where none is given.
        digits
            Digits wanted of every coefficient.
        order
            Highest power of eps.
        """
        exact, wanted = _exact(point), _powers(integrals)
        values = self._with_chain(lambda chain: evaluate(chain, exact, wanted, order, digits))
        shown = values_data(self.definition, exact, digits, values)
        return ValuesResult.of(PointValues(exact, values), self.definition, shown)

    def grid(
        self,
        axes: Mapping[str, Sequence[Number]],
        point: Mapping[str, Number] | None = None,
        integrals: Iterable[Sequence[int]] = (),
        digits: int = 30,
        order: int = 0,
    ) -> GridResult:
        """Values on a curve or a grid: the product of the axes.

        Parameters
        ----------
        axes
            The invariants that vary, with their values.
        point
            Values of the others.
        integrals, digits, order
            As for `evaluate`.

        Raises
        ------
        OutOfTimeError
            If the time allowed is over before all points have values.
        """
        exact, wanted = _exact(point or {}), _powers(integrals)
        chosen = [Axis(name, tuple(_number(v) for v in values)) for name, values in axes.items()]

        def compute(chain: Chain) -> GridResult:
            grid = evaluate_grid(chain, exact, chosen, wanted, order, digits)
            if grid.stopped is not None:
                raise grid.stopped
            shown = grid_data(
                self.definition,
                {axis.name: axis.values for axis in chosen},
                digits,
                grid.values,
                grid.left_out,
                grid.thresholds,
            )
            points = tuple(PointValues(place, values) for place, values in grid.values)
            return GridResult.of(GridValues(points, grid.left_out), self.definition, shown)

        return self._with_chain(compute)

    def expansion(
        self,
        name: str,
        place: Number,
        side: int,
        point: Mapping[str, Number] | None = None,
        integrals: Iterable[Sequence[int]] = (),
        digits: int = 30,
        order: int = 0,
        terms: int = 3,
    ) -> ExpansionResult:
        """Expand in the distance h from a point, which may be singular: ``name = place + side * h``.

        Parameters
        ----------
        name, place, side
            Which invariant approaches which value; `side` is 1 for larger values, -1 for smaller ones.
        point
            Values of the other invariants.
        integrals, digits, order
            As for `evaluate`.
        terms
            Highest power of h.
        """
        if side not in (1, -1):
            raise InputError(f"the side of an approach is 1 or -1, not {side!r}")
        exact, wanted = _exact(point or {}), _powers(integrals)
        goal = Approach(name, _number(place), side)
        found = self._with_chain(lambda chain: expand(chain, exact, goal, wanted, order, terms, digits))
        listed = [(e.powers, e.epsilon, e.certified, e.route) for e in found]
        shown = expansion_data(self.definition, exact, str(goal), terms, digits, listed)
        return ExpansionResult.of(NearPoint(goal, exact, found), self.definition, shown)


def _number(value: Number) -> Fraction:
    return parse_number(value) if isinstance(value, str) else Fraction(value)


def _exact(point: Mapping[str, Number]) -> dict[str, Fraction]:
    return {name: _number(value) for name, value in point.items()}


def _powers(integrals: Iterable[Sequence[int]]) -> tuple[Powers, ...]:
    return tuple(tuple(int(a) for a in powers) for powers in integrals)


def load(
    path: str | os.PathLike[str],
    work: str | os.PathLike[str] | None = None,
    workers: int | None = None,
    masters: Iterable[Sequence[int]] = (),
    progress: Progress = SILENT,
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
    masters
        Integrals, by their powers, that are to be masters; the others are chosen.
    progress
        Told what is being done.

    Raises
    ------
    InputError
        If the file cannot be read or what is in it is wrong.
    """
    file = Path(path)
    definition = read_family_file(file)
    folder = Path(work) if work is not None else file.parent / ".ibpred" / definition.name
    return Family(definition, folder, workers or os.cpu_count() or 1, _powers(masters), progress)
