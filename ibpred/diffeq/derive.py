"""The differential equations of the masters in every invariant."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from ibpred.diffeq.system import DifferentialSystem, SparseMatrix
from ibpred.exact.rational import Rational
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.family.units import integral_dimension, restore_unit
from ibpred.identities.derivatives import derivative_templates
from ibpred.identities.quantities import template_at
from ibpred.progress import SILENT, Progress
from ibpred.reconstruct.functions import Evidence
from ibpred.reduction.deck import PLAIN_DECK, Deck
from ibpred.reduction.recording import (
    Effort,
    check_masters,
    coefficients,
    record_quantities,
)
from ibpred.reduction.wanted import check_powers
from ibpred.sectors.analysis import SectorAnalysis


@dataclass(frozen=True)
class Derivation:
    """A differential system with the evidence of its derivation.

    Attributes
    ----------
    system
        The differential equations.
    evidence
        Of the reconstruction; None for a family whose masters do not depend on any invariant.
    effort
        What it took.
    """

    system: DifferentialSystem
    evidence: Evidence | None
    effort: Effort | None


def differential_system(
    family: FamilyDefinition,
    analysis: SectorAnalysis,
    masters: Sequence[Powers],
    primes: Sequence[int],
    seed: int,
    deck: Deck = PLAIN_DECK,
    progress: Progress = SILENT,
) -> Derivation:
    """Differentiate the masters in every invariant (the unit included) and reduce the result.

    The derivatives are unknowns of the recorded elimination itself, so that only the entries of the
    matrices are ever reconstructed. (Differential equations from identities: Kotikov, Phys. Lett. B254
    (1991) 158; Remiddi, hep-th/9711188; Gehrmann, Remiddi, hep-ph/9912329.)

    Parameters
    ----------
    family, analysis
        The family and its sectors.
    masters
        The masters, as `find_masters` gives them.
    primes, seed
        Engine primes in the order in which they are used, and the seed of all random points.
    deck
        Where tapes are kept and played.
    progress
        Told about the parts of the work.

    Raises
    ------
    UnfinishedError
        If derivatives do not reduce to the masters, or the entries cannot be reconstructed.
    """
    check_masters(family, masters)
    for powers in masters:
        check_powers(family, powers)
    names = tuple(invariant.name for invariant in family.invariants)
    if not names:
        return Derivation(_system(family, masters, {}), None, None)
    templates = derivative_templates(family)
    quantities = [template_at(templates[name], tuple(powers)) for name in names for powers in masters]
    recorded = record_quantities(family, analysis, masters, quantities, primes, seed, deck, progress)
    values, evidence, effort = coefficients(family, recorded, primes, seed, deck, progress)
    sizes = {invariant.name: invariant.dimension for invariant in family.invariants}
    weights = [integral_dimension(family, powers)[0] for powers in masters]
    entries: dict[str, list[tuple[int, int, Rational]]] = {name: [] for name in names}
    for (quantity, column), value in sorted(values.items()):
        name, row = names[quantity // len(masters)], quantity % len(masters)
        dimension = weights[row] - weights[column] - sizes[name]
        entries[name].append((row, column, restore_unit(value, dimension, family)))
    matrices = {name: tuple(found) for name, found in entries.items()}
    return Derivation(_system(family, masters, matrices), evidence, effort)


def _system(
    family: FamilyDefinition, masters: Sequence[Powers], matrices: Mapping[str, SparseMatrix]
) -> DifferentialSystem:
    return DifferentialSystem(
        family.name,
        tuple(tuple(powers) for powers in masters),
        tuple(invariant.name for invariant in family.invariants),
        tuple(invariant.dimension for invariant in family.invariants),
        family.unit,
        family.dimension,
        family.full_ring,
        matrices,
        singular_locus(matrices),
    )


def singular_locus(matrices: Mapping[str, SparseMatrix]) -> tuple[Rational, ...]:
    """Irreducible denominator factors that depend on more than d, in a canonical order."""
    found: dict[str, Rational] = {}
    for entries in matrices.values():
        for _, _, value in entries:
            ring = value.ring
            bottom = ring.fraction(value.denominator, ring.context.constant(1))
            for polynomial, _ in bottom.factors()[1]:
                factor = ring.fraction(polynomial, ring.context.constant(1))
                if set(factor.variables()) - {"d"}:
                    found[str(factor)] = factor
    return tuple(sorted(found.values(), key=lambda f: (f.numerator.total_degree(), str(f))))
