"""Bases of masters of a family with the auxiliary mass, and how rough the differential equations are in them.

Both the length of series and the widening of balls grow with the norm of the differential equations
along the path, which differs by orders of magnitude between bases: some families are smooth with numerators,
others with dots.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from itertools import combinations_with_replacement

import flint
import numpy as np

from ibpred.balls.context import RealBall, complex_ball, precision
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.numerics.auxiliary.infinity import flow_system
from ibpred.numerics.auxiliary.plan import Flow
from ibpred.numerics.auxiliary.solve import lower_path
from ibpred.numerics.frobenius.formal import singular_point
from ibpred.numerics.frobenius.majorant import majorant, operator_norm
from ibpred.numerics.frobenius.poles import PartialFractions, partial_fractions
from ibpred.numerics.frobenius.system import RationalSystem, inverted
from ibpred.numerics.frobenius.tracks import all_positions, tracks_around
from ibpred.progress import SILENT, Progress
from ibpred.reduction.deck import TapeSampler
from ibpred.reduction.recording import record_quantities
from ibpred.reduction.wanted import single
from ibpred.sectors.analysis import SectorAnalysis
from ibpred.sectors.order import lines_of, sector_of

SMOOTH = 40.0
"""Roughness below which no other basis is looked for."""

TRIAL = Fraction(1, 1009)
"""An eps without meaning, at which ranks and sizes are looked at."""

_BITS = 128
_TERMS = 400
_DOTS = 2  # most dots tried up to three loops; one more for every further loop


def dotted_integrals(sector: int, lines: int, dots: int) -> list[Powers]:
    """Integrals of a sector with so many dots and no numerators."""
    inside = lines_of(sector)
    found = []
    for chosen in combinations_with_replacement(inside, dots):
        powers = [int(i in inside) for i in range(lines)]
        for line in chosen:
            powers[line] += 1
        found.append(tuple(powers))
    return found


def dotted_masters(
    family: FamilyDefinition,
    analysis: SectorAnalysis,
    masters: Sequence[Powers],
    primes: Sequence[int],
    seed: int,
    progress: Progress = SILENT,
) -> tuple[Powers, ...]:
    """Masters with dots instead of numerators, as far as there are independent ones with few dots.

    Parameters
    ----------
    family, analysis, masters
        The family, its sectors and its masters.
    primes, seed
        Engine primes (two are used), and the seed of the random point.
    progress
        Told about the reduction.

    Raises
    ------
    UnfinishedError
        If the dotted integrals do not reduce to the masters.
    """
    sectors: dict[int, list[int]] = {}
    for index, powers in enumerate(masters):
        sectors.setdefault(sector_of(powers), []).append(index)
    most = max(_DOTS, len(family.loops) - 1)
    pools = {
        sector: [p for dots in range(most + 1) for p in dotted_integrals(sector, len(masters[0]), dots)]
        for sector, own in sectors.items()
        if any(power < 0 for index in own for power in masters[index])
    }
    wanted = [powers for pool in pools.values() for powers in pool]
    if not wanted:
        return tuple(masters)
    quantities = [single(family, powers) for powers in wanted]
    recorded = record_quantities(family, analysis, masters, quantities, primes, seed, progress=progress)
    prime = primes[0]
    random = np.random.default_rng(seed)
    point = random.integers(1, prime, size=(len(family.internal_ring.names), 1), dtype=np.uint64)
    values, _ = TapeSampler(recorded.tape)(point, prime)
    table = {entry: int(row[0]) for entry, row in zip(recorded.entries, values, strict=True)}
    place = {powers: i for i, powers in enumerate(wanted)}
    chosen = list(masters)
    for sector, pool in pools.items():
        own = sectors[sector]
        rows: list[list[int]] = []
        taken: list[Powers] = []
        for powers in pool:
            row = [table.get((place[powers], index), 0) for index in own]
            if len(taken) < len(own) and flint.nmod_mat([*rows, row], prime).rank() == len(rows) + 1:
                rows.append(row)
                taken.append(powers)
        if len(taken) == len(own):
            for index, powers in zip(own, taken, strict=True):
                chosen[index] = powers
    return tuple(chosen)


def roughness(flow: Flow, eps: Fraction) -> float:
    """The largest norm of the differential equations along the path, and of its residues at the ends.

    Raises
    ------
    UnfinishedError
        If an end is no regular singular point.
    """
    system = flow_system(flow, eps)
    fractions = partial_fractions(system)
    positions = all_positions(fractions, _BITS)
    worst = 0.0
    for point in lower_path(fractions):
        centre = complex_ball(*point, _BITS)
        with precision(_BITS):
            distances = [flint.arb((position - centre).abs_lower()) for position in positions]
            tracks = tracks_around(fractions, centre, _least(distances), _BITS)
        worst = max(worst, majorant(tracks, _TERMS).size)
    return max(
        worst,
        *(_end_norm(end, name, flow) for end, name in ((system, "zero"), (inverted(system), "infinite"))),
    )


def _least(distances: Sequence[RealBall]) -> RealBall:
    least = flint.arb(1)
    for i, distance in enumerate(distances):
        least = distance if i == 0 else least.min(distance)
    return least


def _end_norm(system: RationalSystem, name: str, flow: Flow) -> float:
    point = singular_point(system, f"{name} auxiliary mass of {flow.family}")
    others = [pole for pole in point.fractions.poles if pole.position() != 0]
    with precision(_BITS):
        positions = all_positions(PartialFractions(point.size, tuple(others), ()), _BITS)
        scale = _least([flint.arb(position.abs_lower()) for position in positions])
        tracks = tracks_around(point.fractions, flint.acb(0), scale, _BITS)
        residue = flint.acb_mat(point.residue)
    bounds = majorant(tracks, _TERMS, residue)
    return max(bounds.size, operator_norm(residue, bounds))
