"""Exact boundary values at a corner of the kinematics, for families without an epsilon-form.

Corners that are tried: all masses small, all other invariants small, one invariant small; the rest at modulus
one. The first one at which regions fix the masters serves.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from fractions import Fraction

import flint

from ibpred.balls.context import Ball
from ibpred.boundary.behaviour.regions import parametric_family
from ibpred.diffeq.system import DifferentialSystem
from ibpred.errors import PointError, UnfinishedError
from ibpred.family.signs import euclidean_signs, masses
from ibpred.numerics.corner.start import (
    CornerSolution,
    StartConstants,
    corner_solution,
    lowest_order,
    start_constants,
)
from ibpred.numerics.laurent.expanded import expanded_system
from ibpred.numerics.laurent.local_laurent import (
    LocalConstants,
    LocalSystem,
    local_system,
    matching_distance,
    order_depth,
    values_at,
)
from ibpred.run.chain.chain import Chain
from ibpred.run.values.rays import Ray


@dataclass(frozen=True)
class CornerStart:
    """A corner at which the masters are fixed.

    Attributes
    ----------
    ray
        From the corner into the Euclidean region.
    solution
        The masters there, exactly in eps.
    """

    ray: Ray
    solution: CornerSolution


@dataclass(frozen=True)
class _Found:
    start: CornerStart | None
    reasons: tuple[str, ...]


def corner_start(chain: Chain) -> CornerStart:
    """The first corner at which regions fix the masters; kept in the store.

    Raises
    ------
    UnfinishedError
        If there is none, with the reasons.
    """
    found = chain.kept("regions at a corner", _Found, None, lambda: _search(chain))
    if found.start is None:
        raise UnfinishedError(f"no corner fixes the masters: {'; '.join(found.reasons) or 'none to try'}")
    return found.start


def _search(chain: Chain) -> _Found:
    system = chain.derivation().system
    reasons = []
    for ray in _corners(chain):
        chain.progress.stage(f"regions at {ray.text()}")
        try:
            images = ray.images()
            local = _local(system, ray, 1)
            representation = parametric_family(chain.definition, images)
            solution = corner_solution(system, representation, images, local)
        except (UnfinishedError, PointError) as error:
            reasons.append(f"at {ray.text()}: {error}")
            continue
        return _Found(CornerStart(ray, solution), tuple(reasons))
    return _Found(None, tuple(reasons))


def _corners(chain: Chain) -> Iterator[Ray]:
    family = chain.definition
    names = [invariant.name for invariant in family.invariants]
    signs = euclidean_signs(family)
    if signs is None or len(names) < 2:
        return
    of_masses = masses(family)
    sets = [
        [name for name in names if name in of_masses],
        [name for name in names if name not in of_masses],
        *([name] for name in names),
    ]
    tried = []
    for small in sets:
        if small and len(small) < len(names) and small not in tried:
            tried.append(small)
            place = {name: Fraction(0 if name in small else signs[name]) for name in names}
            yield Ray(place, {name: Fraction(signs[name]) for name in small})


def _local(system: DifferentialSystem, ray: Ray, depth: int) -> LocalSystem:
    return local_system(expanded_system(system, depth), ray.place, ray.direction, ray.text())


def corner_values(
    chain: Chain, highest: int, bits: int
) -> tuple[Mapping[str, Fraction], tuple[Mapping[int, Ball], ...]]:
    """A Euclidean point near the corner, and the masters there through ``eps^highest``, with rigorous radii.

    Raises
    ------
    UnfinishedError
        If no corner fixes the masters, or constants beyond the exact ones are needed.
    PrecisionError
        If the precision is too low.
    """
    start = corner_start(chain)
    system = chain.derivation().system
    shifts = expanded_system(system, 1).shifts
    depth = order_depth(shifts, lowest_order(start.solution, shifts), highest)
    constants = chain.kept(
        "corner constants", StartConstants, depth, lambda: _constants(system, start, shifts, depth)
    )
    local = _local(system, start.ray, len(constants.orders))
    exact = LocalConstants(
        constants.lowest,
        tuple(
            tuple(flint.acb_mat([[value.ball(bits)] for value in part]) for part in line)
            for line in constants.orders
        ),
    )
    h = matching_distance(local)
    return start.ray.at(h), values_at(local, exact, h, bits)


def _constants(
    system: DifferentialSystem, start: CornerStart, shifts: tuple[int, ...], depth: int
) -> StartConstants:
    """The constants from the first order on that is not zero."""
    lowest = lowest_order(start.solution, shifts)
    found = start_constants(start.solution, shifts, _local(system, start.ray, depth), lowest)
    empty = 0
    while empty < depth - 1 and not any(value for part in found.orders[empty] for value in part):
        empty += 1
    return replace(found, lowest=lowest + empty, orders=found.orders[empty:])
