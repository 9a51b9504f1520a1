"""Paths from x -> 0+ to a target in the closed upper or lower half plane.

The principal sheet is C without the negative real axis: there the integrals of a planar region in one
ratio are regular (F is linear in the ratio with positive coefficients), so letters on the positive axis
are regular points and may be passed on either side. In general the path meant is: turn around 0 to the
target's direction, then go straight out, passing letters on the axis on the target's side (above, on the
positive axis); any path in the wedge between the axis and the first complex letter is the same.
Everything is planned in the upper half plane and reflected for the lower one.

The plan is a chain of discs, found with floating-point numbers; all its points are exact, and what the
series need of them (the ratio to the radius of convergence) is checked again in ball arithmetic where the
series are summed.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from ibpred.errors import InputError, PointError, PrecisionError
from ibpred.numerics.forms.canonical import CanonicalSystem, refuse_singular

Point = tuple[Fraction, Fraction]
"""Real and imaginary part."""

_STEP = 0.5  # largest distance from a centre, in radii of convergence
_LAST_STEP = 0.7  # one longer last step is cheaper than two short ones
_ANGLES = 12
_LONGEST_CHAIN = 400


@dataclass(frozen=True)
class Target:
    """A ratio on the principal sheet: ``modulus * exp(i pi half_turns)``.

    Attributes
    ----------
    modulus
        Positive.
    half_turns
        0: the positive axis; 1 and -1: the negative axis from above and from below.
    """

    modulus: Fraction
    half_turns: int

    @property
    def value(self) -> Fraction:
        """The ratio as a real number."""
        return -self.modulus if self.half_turns else self.modulus


def turns_one_way(targets: Mapping[str, Target]) -> dict[str, int]:
    """The half turns of several ratios.

    Raises
    ------
    PointError
        If half turns in both directions meet.
    """
    turns = {name: target.half_turns for name, target in targets.items()}
    if {1, -1} <= set(turns.values()):
        raise PointError("the ratios turn in both directions on the way to this point; choose another unit")
    return turns


@dataclass(frozen=True)
class Regular:
    """A disc around a regular point."""

    point: Point


@dataclass(frozen=True)
class Singular:
    """A disc around the zero of a linear letter; `letter` is its index, None for x = 0 without one."""

    point: Fraction
    letter: int | None


@dataclass(frozen=True)
class Infinity:
    """The outside of a disc."""


Disc = Regular | Singular | Infinity


@dataclass(frozen=True)
class Step:
    """Leave a disc at a point, which the next disc holds too."""

    disc: Disc
    end: Point


def plan(system: CanonicalSystem, target: Target) -> tuple[Step, ...]:
    """The chain of discs from x -> 0+ to the target.

    Returns
    -------
    The first step's disc is the one around 0; the last step ends at the target.

    Raises
    ------
    PointError
        If the target is the zero of a letter.
    PrecisionError
        If the target is so close to a complex letter that no short chain exists.
    """
    if target.modulus <= 0 or target.half_turns not in (-1, 0, 1):
        raise InputError(f"{target} is no point of the principal sheet")
    refuse_singular(system, target.value)
    upper = _plan_above(system, target)
    if target.half_turns >= 0:
        return upper
    return tuple(Step(_reflected(step.disc), (step.end[0], -step.end[1])) for step in upper)


def sharing(system: CanonicalSystem, targets: Sequence[Target]) -> list[tuple[Target, tuple[Target, ...]]]:
    """Targets in groups that one plan reaches: (the target to plan for, all that lie in its last disc).

    Raises
    ------
    PointError
        If a target is the zero of a letter.
    """
    for target in targets:
        refuse_singular(system, target.value)
    letters = _other_letters(system)
    groups = []
    for turns in (-1, 0, 1):
        left = sorted((t for t in set(targets) if t.half_turns == turns), key=lambda t: t.modulus)
        while left:
            leader, held = _leader(system, letters, left)
            groups.append((leader, tuple(held)))
            left = [target for target in left if target not in held]
    return groups


def _leader(
    system: CanonicalSystem, letters: NDArray[np.complex128], targets: Sequence[Target]
) -> tuple[Target, list[Target]]:
    """The farthest target whose disc holds the first one too, and all that it holds."""
    first = targets[0]
    if not len(letters):
        return first, list(targets)
    inner = Fraction(float(np.abs(letters).min()))
    near = [target for target in targets if target.modulus <= Fraction(_LAST_STEP) * inner]
    if near:
        return near[-1], near
    disc, centre, reach = _last_disc(system, letters, first)
    if not isinstance(disc, Regular):
        if centre is None:
            return first, list(targets)
        return first, [t for t in targets if _within(t, centre, reach) and _same(system, letters, t, disc)]
    best = (first, [t for t in targets if _within(t, complex(first.value), reach)])
    for target in best[1]:
        disc, centre, reach = _last_disc(system, letters, target)
        if isinstance(disc, Regular) and _within(first, complex(target.value), reach):
            held = [t for t in targets if _within(t, complex(target.value), reach)]
            best = (target, held)
    return best


def _within(target: Target, centre: complex, reach: float) -> bool:
    return abs(target.value - Fraction(centre.real)) <= Fraction(reach)


def _same(system: CanonicalSystem, letters: NDArray[np.complex128], target: Target, disc: Disc) -> bool:
    return _last_disc(system, letters, target)[0] == disc


def _reflected(disc: Disc) -> Disc:
    return Regular((disc.point[0], -disc.point[1])) if isinstance(disc, Regular) else disc


def _plan_above(system: CanonicalSystem, target: Target) -> tuple[Step, ...]:
    end: Point = (target.value, Fraction(0))
    zero = Singular(Fraction(0), _zero_letter(system))
    letters = _other_letters(system)
    if not len(letters):
        return (Step(zero, end),)
    inner = Fraction(float(np.abs(letters).min()))
    if target.modulus <= Fraction(_LAST_STEP) * inner:
        return (Step(zero, end),)
    last, centre, reach = _last_disc(system, letters, target)
    everything = np.append(letters, 0)
    wedge = _wedge(letters, target)
    line = _route(everything, wedge, float(inner) * _STEP, centre, reach)
    return _chain(zero, line, everything, last, centre, reach, end)


def _zero_letter(system: CanonicalSystem) -> int | None:
    for index, letter in enumerate(system.letters):
        if letter.root() == 0:
            return index
    return None


def _other_letters(system: CanonicalSystem) -> NDArray[np.complex128]:
    """The letters but x = 0, as floating-point numbers."""
    roots = [complex(root) for letter in system.letters if letter.root() != 0 for root in letter.roots(60)]
    return np.array(roots, dtype=np.complex128)


def _last_disc(
    system: CanonicalSystem, letters: NDArray[np.complex128], target: Target
) -> tuple[Disc, complex | None, float]:
    """The disc that holds the target: it, its centre (None at infinity), how far it reaches."""
    outer = float(np.abs(letters).max())
    if target.modulus * Fraction(_LAST_STEP) >= Fraction(outer):
        return Infinity(), None, outer / _STEP
    everything = np.append(letters, 0)
    for index, letter in enumerate(system.letters):
        root = letter.root()
        if root is None or root == 0:
            continue
        if (target.half_turns and root > 0) or (not target.half_turns and root < 0):
            continue
        distances = np.abs(everything - float(root))
        radius = float(distances[distances > 0].min())
        if abs(target.value - root) <= Fraction(_STEP) * Fraction(radius):
            return Singular(root, index), complex(root), radius * _STEP
    centre = complex(target.value)
    radius = float(np.abs(everything - centre).min())
    return Regular((target.value, Fraction(0))), centre, radius * _STEP


def _wedge(letters: NDArray[np.complex128], target: Target) -> NDArray[np.float64]:
    """Angles between the target's direction and the first complex letter, that direction first."""
    tiny = 1e-9
    angles = np.angle(letters)
    complex_ = angles[(angles > tiny) & (angles < np.pi - tiny)]
    steps = np.arange(_ANGLES + 1) / _ANGLES
    if target.half_turns:
        largest = float(complex_.max(initial=0.0))
        return np.asarray(np.pi - (np.pi - largest) * steps, dtype=np.float64)
    smallest = float(complex_.min(initial=np.pi))
    return np.asarray(smallest * steps, dtype=np.float64)


def _route(
    letters: NDArray[np.complex128],
    wedge: NDArray[np.float64],
    start: float,
    centre: complex | None,
    reach: float,
) -> NDArray[np.complex128]:
    """A polyline in the wedge from the circle |x| = start into the last disc.

    The shortest path in a graph of points on circles, the length of an edge measured in its distance
    from the letters.
    """
    directions = np.exp(1j * wedge)
    directions[wedge == np.pi] = -1.0
    outer = reach if centre is None else abs(centre)
    count = max(2, int(np.ceil(np.log(max(outer / start, 1.01)) / np.log(1.5))) + 1)
    radii = start * (outer / start) ** (np.arange(count) / (count - 1))
    nodes = [(radii[:, None] * directions[None, :]).ravel()]
    if centre is not None:
        ring = centre + 0.98 * reach * np.exp(1j * np.pi * np.arange(_ANGLES + 1) / _ANGLES)
        ring = ring.real + 1j * np.maximum(ring.imag, 0.0)
        inside = (np.angle(ring) >= wedge.min()) & (np.angle(ring) <= wedge.max())
        nodes.append(ring[inside])
    points = np.concatenate(nodes)
    sources = np.arange(len(points)) < len(directions)
    goals = np.abs(points) >= reach * (1 - 1e-9) if centre is None else np.abs(points - centre) <= reach
    # an edge's cost: length over the distance of the segment from the letters
    first, second = points[:, None], points[None, :]
    way = second - first
    length = np.abs(way)
    clearance = np.full(length.shape, np.inf)
    for letter in letters:
        with np.errstate(divide="ignore", invalid="ignore"):
            place = np.clip(np.real((letter - first) * np.conj(way)) / length**2, 0, 1)
        nearest = first + np.where(length > 0, place, 0) * way
        clearance = np.minimum(clearance, np.abs(nearest - letter))
    with np.errstate(divide="ignore", invalid="ignore"):
        cost = np.where(clearance > 1e-6 * (length + np.abs(first)), length / clearance, np.inf)
    return points[_shortest(cost, sources, goals)]


def _shortest(cost: NDArray[np.float64], sources: NDArray[np.bool_], goals: NDArray[np.bool_]) -> list[int]:
    """Dijkstra's shortest path in a dense graph."""
    distance = np.where(sources, 0.0, np.inf)
    before = np.full(len(distance), -1)
    open_ = np.ones(len(distance), dtype=bool)
    while True:
        node = int(np.argmin(np.where(open_, distance, np.inf)))
        if not open_[node] or not np.isfinite(distance[node]):
            raise PrecisionError(
                "no path to the point was found: letters lie too close together; move the point"
            )
        if goals[node]:
            break
        open_[node] = False
        through = distance[node] + cost[node]
        better = open_ & (through < distance)
        distance[better] = through[better]
        before[better] = node
    path = [node]
    while before[path[-1]] >= 0:
        path.append(int(before[path[-1]]))
    return path[::-1]


def _chain(
    zero: Singular,
    line: NDArray[np.complex128],
    letters: NDArray[np.complex128],
    last: Disc,
    centre: complex | None,
    reach: float,
    end: Point,
) -> tuple[Step, ...]:
    """Discs along the polyline, each as far ahead as its radius of convergence allows."""
    dense = _sampled(line, letters)
    radius = np.abs(dense[:, None] - letters[None, :]).min(axis=1)
    inside = np.abs(dense) >= reach * (1 - 1e-9) if centre is None else np.abs(dense - centre) <= reach
    steps = [Step(zero, _exact(dense[0]))]
    at = 0
    while not inside[at]:
        near = np.abs(dense - dense[at]) <= _STEP * radius
        middle = at + _run(near[at:])
        near = np.abs(dense - dense[middle]) <= _STEP * radius[middle]
        after = at + _run(near[at:])
        arrived = np.flatnonzero(inside[at : after + 1])
        if len(arrived):
            after = at + int(arrived[0])
        if after <= at or len(steps) > _LONGEST_CHAIN:
            raise PrecisionError(
                f"the point is too close to a complex letter to be reached in {_LONGEST_CHAIN} steps; move it"
            )
        steps.append(Step(Regular(_exact(dense[middle])), _exact(dense[after])))
        at = after
    return (*steps, Step(last, end))


def _run(flags: NDArray[np.bool_]) -> int:
    """Length of the initial run of true values, less one."""
    false = np.flatnonzero(~flags)
    return (int(false[0]) if len(false) else len(flags)) - 1


def _sampled(line: NDArray[np.complex128], letters: NDArray[np.complex128]) -> NDArray[np.complex128]:
    """Points on the polyline, closer together than a sixteenth of the distance from the letters."""
    points = [complex(line[0])]
    for first, second in pairwise(line):
        place = 0.0
        while place < 1.0:
            here = first + place * (second - first)
            clearance = float(np.abs(letters - here).min())
            place = min(1.0, place + clearance / 16 / abs(second - first))
            points.append(complex(first + place * (second - first)))
    return np.array(points, dtype=np.complex128)


def _exact(point: complex) -> Point:
    imaginary = max(float(np.imag(point)), 0.0)
    return Fraction(float(np.real(point))), Fraction(imaginary)


def centres(steps: Sequence[Step]) -> tuple[Disc, ...]:
    """The discs of a plan, in order."""
    return tuple(step.disc for step in steps)
