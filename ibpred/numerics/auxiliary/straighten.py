"""Where the flow from curved to straight lines begins, and its differential equations."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import ceil

import flint

from ibpred.errors import ReconstructionError
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.numerics.auxiliary.bases import TRIAL
from ibpred.numerics.auxiliary.choice import dotted
from ibpred.numerics.auxiliary.curved import FLATNESS, curved, scaling
from ibpred.numerics.auxiliary.reducer import Derived, Enlarged, Reducer
from ibpred.numerics.frobenius.path import approximate
from ibpred.numerics.frobenius.poles import partial_fractions
from ibpred.numerics.frobenius.system import fmpq, system_in
from ibpred.numerics.frobenius.tracks import all_positions
from ibpred.sectors.analysis import analyse

_OUTSIDE = 4  # the start, over the farthest singular point


@dataclass(frozen=True)
class OpenStraightening:
    """A straightening whose start is not known yet.

    Attributes
    ----------
    place
        The family with curved lines.
    derived
        The differential equations in r, and the wanted integrals (of the straight lines).
    start
        The r to start from.
    """

    place: Enlarged
    derived: Derived
    start: Fraction


def straightening(reducer: Reducer, family: FamilyDefinition, wanted: Sequence[Powers]) -> OpenStraightening:
    """Curve the linear lines of a family at a numeric point.

    Raises
    ------
    UnfinishedError
        As `ibpred.numerics.auxiliary.curved.curved`.
    ReconstructionError
        If the engine finds no differential equations.
    """
    flat = curved(family)
    analysis = analyse(flat)
    place = Enlarged(flat, analysis, reducer.masters(flat, analysis))
    try:
        derived = reducer.derived(place, FLATNESS, wanted)
    except ReconstructionError:
        place = dotted(reducer, place)
        derived = reducer.derived(place, FLATNESS, wanted)
    scale = flat.internal_ring.variable(FLATNESS)
    targets = tuple(
        tuple((index, value * scale ** scaling(family, powers)) for index, value in row)
        for powers, row in zip(wanted, derived.targets, strict=True)
    )
    return OpenStraightening(place, Derived(derived.matrix, targets), _start(place, derived))


def _start(place: Enlarged, derived: Derived) -> Fraction:
    """A value of r beyond all singular points, so that the series at infinity converges there."""
    dimension = place.family.dimension
    images = {"d": flint.fmpq_poly([fmpq(dimension - 2 * TRIAL)]), FLATNESS: flint.fmpq_poly([0, 1])}
    system = system_in(len(place.masters), derived.matrix, images)
    poles = approximate(all_positions(partial_fractions(system), 64))
    return Fraction(max(1, ceil(_OUTSIDE * max((abs(p) for p in poles), default=0.0))))
