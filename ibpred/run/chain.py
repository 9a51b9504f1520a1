"""The chain: each stage computed once, kept in the store, and read by the next."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from itertools import product

import ibpred
from ibpred.boundary.fix import Boundary, fix_constants
from ibpred.boundary.problem import boundary_problem, one_scale_values
from ibpred.diffeq.derive import Derivation, differential_system
from ibpred.diffeq.ratios import DimensionlessSystem, dimensionless
from ibpred.digest import digest
from ibpred.epsform.factorise import factorise
from ibpred.epsform.form import Connection, EpsilonForm, Obstructed
from ibpred.epsform.matrices import identity, scaled
from ibpred.errors import ObstructionError, UnfinishedError
from ibpred.exact.codec import to_data
from ibpred.exact.rational import ring
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.family.signs import euclidean_signs
from ibpred.iterated.series import Series
from ibpred.iterated.solution import Solution, solve_orders
from ibpred.numerics.value import Value
from ibpred.progress import Progress
from ibpred.reduction.independent import SectorCount, compare_counts
from ibpred.reduction.masters import Masters, find_masters
from ibpred.reduction.table import ReductionTable, reduce_integrals
from ibpred.reduction.wanted import check_powers
from ibpred.report.text import integral_text
from ibpred.run.stages import SEED, Stages
from ibpred.run.store import Store
from ibpred.run.values import evaluate
from ibpred.sectors.analysis import SectorAnalysis, analyse


class Chain(Stages):
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
        identity = digest(["family", ibpred.__version__, to_data(definition)])
        super().__init__(identity, store, progress, workers)
        self.definition = definition
        self._analysis: SectorAnalysis | None = None

    def analysis(self) -> SectorAnalysis:
        """Sectors, symmetries, zero sectors."""
        if self._analysis is None:
            self.progress.stage("sectors")
            self._analysis = analyse(self.definition)
        return self._analysis

    def masters(self) -> Masters:
        """The master integrals."""
        prime = self.primes[0]
        return self._kept(
            "masters",
            Masters,
            None,
            lambda: find_masters(self.definition, self.analysis(), prime, SEED, progress=self.progress),
        )

    def counts(self) -> tuple[SectorCount, ...]:
        """The masters of each sector beside its critical points."""
        masters = self.masters().masters
        return self._kept(
            "counts",
            _Counts,
            None,
            lambda: _Counts(
                compare_counts(
                    self.definition, self.analysis(), masters, self.primes[0], SEED, self.progress
                )
            ),
        ).sectors

    def integrals_within(self, dots: int, rank: int) -> list[Powers]:
        """All integrals of nonzero sectors with at most so many dots and so high a rank."""
        count = len(self.definition.lines)
        found: list[Powers] = []
        for sector in self.analysis().nonzero:
            lines = [i for i in range(count) if sector >> i & 1]
            others = [i for i in range(count) if not sector >> i & 1]
            for above in product(range(dots + 1), repeat=len(lines)):
                if sum(above) > dots:
                    continue
                for below in product(range(rank + 1), repeat=len(others)):
                    if sum(below) > rank:
                        continue
                    powers = [0] * count
                    for line, extra in zip(lines, above, strict=True):
                        powers[line] = 1 + extra
                    for line, power in zip(others, below, strict=True):
                        powers[line] = -power
                    found.append(tuple(powers))
        return found

    def reduction(self, wanted: tuple[Powers, ...]) -> ReductionTable:
        """Integrals in terms of the masters."""
        for powers in wanted:
            check_powers(self.definition, powers)
        masters = self.masters().masters
        return self._kept(
            "reduction",
            ReductionTable,
            wanted,
            lambda: reduce_integrals(
                self.definition,
                self.analysis(),
                wanted,
                masters,
                self.primes,
                SEED,
                self.sampling,
                self.progress,
            ),
        )

    def derivation(self) -> Derivation:
        """The differential equations of the masters, with their evidence."""
        masters = self.masters().masters
        return self._kept(
            "differential equation",
            Derivation,
            None,
            lambda: differential_system(
                self.definition,
                self.analysis(),
                masters,
                self.primes,
                SEED,
                self.sampling,
                self.progress,
            ),
        )

    def signs(self) -> dict[str, int]:
        """Signs of the invariants where the ratios are positive: the Euclidean region's, if there is one."""
        found = euclidean_signs(self.definition)
        if found is None:
            return {invariant.name: 1 for invariant in self.definition.invariants}
        return found

    def dimensionless(self) -> DimensionlessSystem:
        """The differential equations in dimensionless ratios and eps."""
        return dimensionless(self.derivation().system, self.signs())

    def connection(self) -> Connection:
        """What is brought to epsilon-form."""
        system = self.dimensionless()
        labels = tuple(self.label(i) for i in range(len(self.masters().masters)))
        return Connection(system.ratios, system.ring, system.matrices, system.blocks, labels)

    def epsilon_form(self) -> EpsilonForm | Obstructed:
        """The epsilon-factorised form, or what stands in its way."""
        connection = self.connection()
        stored = self._kept(
            "epsilon-form",
            _Outcome,
            None,
            lambda: _outcome(self._normalised(factorise(connection, self.primes, SEED, self.progress))),
        )
        found = stored.form if stored.form is not None else stored.obstructed
        assert found is not None
        return found

    def _normalised(self, found: EpsilonForm | Obstructed) -> EpsilonForm | Obstructed:
        """Scale all functions by one power of eps so that they begin at ``eps^0``.

        The differential equation is blind to such a factor; the boundary constants tell it. Where they
        stay open the form is left as it is.
        """
        if isinstance(found, Obstructed) or len(found.variables) != 1 or any(found.tags):
            return found
        masters = self.masters().masters
        try:
            problem = boundary_problem(self.definition, masters, found, self.euclidean_signs(), 0)
            start = fix_constants(problem).start
        except UnfinishedError:
            return found
        factor = found.ring.variable("eps") ** start
        return replace(
            found,
            transformation=scaled(found.transformation, factor),
            inverse=scaled(found.inverse, 1 / factor),
        )

    def euclidean_signs(self) -> dict[str, int]:
        """Signs of the invariants in the Euclidean region.

        Raises
        ------
        UnfinishedError
            If the family has no Euclidean region.
        """
        found = euclidean_signs(self.definition)
        if found is None:
            raise UnfinishedError(
                f"{self.definition.name} has no Euclidean region (no signs of its invariants make F "
                "positive), and boundary constants are determined from one"
            )
        return found

    def solved_form(self) -> EpsilonForm:
        """The epsilon-form of the whole system; the masters themselves where there is no ratio.

        Raises
        ------
        ObstructionError
            If some block has none.
        """
        if len(self.definition.invariants) <= 1:
            return _trivial_form(len(self.masters().masters))
        found = self.epsilon_form()
        if isinstance(found, Obstructed):
            reasons = "; ".join(
                f"{', '.join(self.label(i) for i in o.rows)}: {o.reason}" for o in found.obstructions
            )
            raise ObstructionError(f"{self.definition.name} has no epsilon-form: {reasons}")
        return found

    def boundary(self, weight: int) -> Boundary:
        """Boundary constants through ``eps^weight`` of the canonical functions."""

        def compute() -> Boundary:
            form, signs, masters = self.solved_form(), self.euclidean_signs(), self.masters().masters
            self.progress.stage("boundary constants")
            if form.variables:
                return fix_constants(boundary_problem(self.definition, masters, form, signs, weight))
            return _one_scale_boundary(one_scale_values(self.definition, masters, signs, weight))

        return self._kept("boundary", Boundary, weight, compute)

    def solution(self, weight: int) -> Solution:
        """The canonical functions in iterated integrals through ``eps^weight``."""
        form, boundary = self.solved_form(), self.boundary(weight)
        self.progress.stage("iterated integrals")
        if form.variables:
            return solve_orders(form, boundary.constants, weight, boundary.start)
        orders = tuple(
            tuple((((), value),) if value else () for value in vector) for vector in boundary.constants
        )
        return Solution((), boundary.start, orders)

    def evaluate(
        self, point: Mapping[str, Fraction], wanted: tuple[Powers, ...], order: int, digits: int
    ) -> tuple[Value, ...]:
        """Values at a point; see `ibpred.run.values.evaluate`."""
        return evaluate(self, point, wanted, order, digits)

    def label(self, row: int) -> str:
        """A master by name."""
        return integral_text(self.definition.name, self.masters().masters[row])


def _trivial_form(count: int) -> EpsilonForm:
    """The form of masters that depend on no ratio: they are their own canonical functions."""
    field = ring(("eps",))
    one = identity(field, count)
    return EpsilonForm((), field, (), (), one, one, ((),) * count)


def _one_scale_boundary(values: Sequence[Series]) -> Boundary:
    start, end = min(series.start for series in values), min(series.end for series in values)
    constants = tuple(tuple(s.coefficient(order) for s in values) for order in range(start, end + 1))
    return Boundary(start, constants, (), ())


@dataclass(frozen=True)
class _Counts:
    sectors: tuple[SectorCount, ...]


@dataclass(frozen=True)
class _Outcome:
    form: EpsilonForm | None
    obstructed: Obstructed | None


def _outcome(found: EpsilonForm | Obstructed) -> _Outcome:
    if isinstance(found, EpsilonForm):
        return _Outcome(found, None)
    return _Outcome(None, found)
