"""Kinematic symmetries: linear maps of the external momenta that keep all their products."""

from __future__ import annotations

from collections.abc import Sequence

from ibpred.exact.rational import Rational
from ibpred.family.definition import FamilyDefinition

LegMap = tuple[tuple[int, ...], ...]
"""``p_e -> sum_f leg_map[e][f] p_f``."""


def leg_maps(source: FamilyDefinition, target: FamilyDefinition) -> tuple[LegMap, ...]:
    """Maps of the source's external momenta to legs of the target that keep the Gram matrix.

    Each external momentum becomes one of the target's legs up to sign, different ones different
    legs; the legs are the external momenta and minus their sum. A map and its negative act alike on
    scalar products once loop momenta are free to change sign, so only the one whose first image has
    a plus sign is listed.

    Returns
    -------
    tuple of E x E integer matrices
        The identity first, where it is one of them; empty if numbers of momenta or the kinematic
        rings differ.
    """
    size = len(source.external)
    if size != len(target.external) or source.kinematic_ring is not target.kinematic_ring:
        return ()
    legs = [tuple(int(e == f) for f in range(size)) for e in range(size)]
    if size > 1:
        legs.append((-1,) * size)
    numbers: dict[Rational, int] = {}
    wanted = [[_number(value, numbers) for value in row] for row in source.gram]
    products = [[_number(_product(target, a, b), numbers) for b in legs] for a in legs]
    found: list[LegMap] = []

    def extend(chosen: list[tuple[int, int]]) -> None:
        e = len(chosen)
        if e == size:
            found.append(tuple(tuple(sign * c for c in legs[leg]) for leg, sign in chosen))
            return
        for sign in (1, -1) if e else (1,):
            for leg in range(len(legs)):
                if all(leg != other for other, _ in chosen) and _fits(
                    wanted[e], products[leg], leg, sign, chosen
                ):
                    extend([*chosen, (leg, sign)])

    extend([])
    identity = tuple(tuple(int(e == f) for f in range(size)) for e in range(size))
    return tuple(sorted(found, key=lambda item: item != identity))


def _fits(
    wanted: Sequence[int], products: Sequence[int], leg: int, sign: int, chosen: Sequence[tuple[int, int]]
) -> bool:
    if products[leg] != wanted[len(chosen)]:
        return False
    return all(sign * s * products[other] == wanted[i] for i, (other, s) in enumerate(chosen))


def _product(family: FamilyDefinition, a: Sequence[int], b: Sequence[int]) -> Rational:
    total = family.kinematic_ring.zero
    for e, x in enumerate(a):
        for f, y in enumerate(b):
            if x and y:
                total = total + family.gram[e][f] * (x * y)
    return total


def _number(value: Rational, numbers: dict[Rational, int]) -> int:
    """A signed number for each value: equal for equal values, opposite for opposite ones."""
    if not value:
        return 0
    if -value in numbers:
        return -numbers[-value]
    return numbers.setdefault(value, len(numbers) + 1)
