"""Reductions and differential equations in one variable, with the primes, tapes and progress of a plan."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from ibpred.diffeq.system import SparseMatrix
from ibpred.exact.rational import Rational
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.identities.derivatives import derivative_templates
from ibpred.identities.quantities import Quantity, template_at
from ibpred.numerics.auxiliary.plan import Row
from ibpred.progress import Progress
from ibpred.reduction.deck import Deck
from ibpred.reduction.masters import find_masters
from ibpred.reduction.recording import coefficients, record_quantities
from ibpred.reduction.wanted import single
from ibpred.sectors.analysis import SectorAnalysis


@dataclass(frozen=True)
class Enlarged:
    """A family at a numeric point with one variable more, its sectors and its masters."""

    family: FamilyDefinition
    analysis: SectorAnalysis
    masters: tuple[Powers, ...]


@dataclass(frozen=True)
class Derived:
    """The differential equations of the masters in the variable, and integrals in terms of the masters."""

    matrix: SparseMatrix
    targets: tuple[Row, ...]


@dataclass(frozen=True)
class Reducer:
    """What all reductions of a plan share.

    Attributes
    ----------
    primes, seed
        Engine primes and the seed of all random points.
    deck
        Where tapes are kept and played.
    progress
        Told about the parts of the work.
    """

    primes: Sequence[int]
    seed: int
    deck: Deck
    progress: Progress

    def masters(self, family: FamilyDefinition, analysis: SectorAnalysis) -> tuple[Powers, ...]:
        """The masters of a family."""
        return find_masters(family, analysis, self.primes[0], self.seed, progress=self.progress).masters

    def rows(
        self,
        family: FamilyDefinition,
        analysis: SectorAnalysis,
        masters: Sequence[Powers],
        quantities: Sequence[Quantity],
    ) -> list[Row]:
        """Quantities in terms of the masters.

        Raises
        ------
        ReconstructionError
            If the coefficients are no rational functions that the engine finds.
        """
        recorded = record_quantities(
            family, analysis, masters, quantities, self.primes, self.seed, self.deck, self.progress
        )
        values, _, _ = coefficients(family, recorded, self.primes, self.seed, self.deck, self.progress)
        rows: list[list[tuple[int, Rational]]] = [[] for _ in quantities]
        for (quantity, master), value in sorted(values.items(), key=lambda item: item[0]):
            rows[quantity].append((master, value))
        return [tuple(row) for row in rows]

    def derived(self, place: Enlarged, variable: str, wanted: Sequence[Powers]) -> Derived:
        """Derivatives of the masters and wanted integrals, on one tape.

        Raises
        ------
        ReconstructionError
            As `rows`.
        """
        template = derivative_templates(place.family)[variable]
        derivatives = [template_at(template, powers) for powers in place.masters]
        targets = [single(place.family, powers) for powers in wanted]
        rows = self.rows(place.family, place.analysis, place.masters, [*derivatives, *targets])
        count = len(place.masters)
        matrix = tuple(
            (row, column, value) for row, line in enumerate(rows[:count]) for column, value in line
        )
        return Derived(matrix, tuple(rows[count:]))
