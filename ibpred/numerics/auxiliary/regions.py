"""Regions at large auxiliary mass.

Each loop momentum is either as large as the mass or stays small; the lines with large momenta form the hard
part, which is a vacuum integral with one massive line in leading order, and the rest is an integral of
fewer loops (expansion in subgraphs: Chetyrkin; Gorishny; V. A. Smirnov, Commun. Math. Phys. 134 (1990) 109).
The sets of soft lines are the flats of the lines' loop momenta that do not contain the massive line's, and
all other lines where no loop is hard. ``I ~ eta^(h d/2 - sum_hard a_i) V J`` with the vacuum integral V at
unit mass and the soft integral J.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import combinations
from math import comb

from ibpred.errors import UnfinishedError
from ibpred.exact.rational import ring
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.family.lines import RowSpace
from ibpred.numerics.auxiliary.families import family_of_momenta
from ibpred.sectors.parameters import family_terms
from ibpred.sectors.scaleless import zero_sectors_of

Vector = tuple[Fraction, ...]


@dataclass(frozen=True)
class Region:
    """A region.

    Attributes
    ----------
    loops
        Number of hard loops.
    hard, soft
        Lines (propagators only) with and without hard momentum.
    soft_family
        The family of the soft integrals, its first lines the soft ones in order; None where all loops are
        hard.
    hard_momenta
        Momenta of the hard lines over the hard loop momenta.
    jacobian
        ``|det|`` of the change of the loop momenta: the measure gets the factor ``jacobian^-d``.
    """

    loops: int
    hard: tuple[int, ...]
    soft: tuple[int, ...]
    soft_family: FamilyDefinition | None
    hard_momenta: tuple[Vector, ...]
    jacobian: Fraction


def regions(family: FamilyDefinition, heavy: int) -> tuple[Region, ...]:
    """All regions of a family at a numeric point with one heavy line.

    The first one has no hard loop: its soft integrals belong to the family itself.

    Parameters
    ----------
    family
        Without the auxiliary mass.
    heavy
        The line that gets it.
    """
    lines = [i for i in family.propagators if i != heavy]
    loops = len(family.loops)
    none = Region(0, (heavy,), tuple(lines), family, (), Fraction(1))
    found = [none]
    for rank in reversed(range(loops)):
        seen: set[tuple[int, ...]] = set()
        for chosen in combinations(lines, rank):
            space = RowSpace()
            if any(space.add(_loop_part(family, i)) is not None for i in chosen):
                continue
            if _depends(space, _loop_part(family, heavy)):
                continue
            soft = tuple(i for i in lines if _depends(space, _loop_part(family, i)))
            if soft not in seen:
                seen.add(soft)
                found.append(_region(family, heavy, soft, chosen))
    return tuple(found)


def _momentum(family: FamilyDefinition, line: int) -> Vector:
    momentum = family.lines[line].momentum
    assert momentum is not None, "lines were checked"
    return momentum


def _loop_part(family: FamilyDefinition, line: int) -> Vector:
    return _momentum(family, line)[: len(family.loops)]


def _depends(space: RowSpace, row: Vector) -> bool:
    copy = RowSpace()
    copy._rows, copy.size = list(space._rows), space.size
    return copy.add(row) is not None


def _region(family: FamilyDefinition, heavy: int, soft: tuple[int, ...], chosen: Sequence[int]) -> Region:
    loops = len(family.loops)
    # new loop momenta: those of some soft lines, then those of some hard ones
    space = RowSpace()
    rows: list[Vector] = []
    others = [heavy, *(i for i in family.propagators if i != heavy and i not in soft)]
    for line in (*chosen, *others):
        if len(rows) < loops and space.add(_loop_part(family, line)) is None:
            rows.append(_loop_part(family, line))
    if len(rows) < loops:
        raise UnfinishedError(f"{family.name}: the lines do not depend on all loop momenta")
    inverse, determinant = _inverse(rows)
    count = len(chosen)
    hard = tuple(i for i in family.propagators if i not in soft)

    def changed(line: int) -> Vector:
        part = _loop_part(family, line)
        return tuple(sum((a * inverse[k][j] for k, a in enumerate(part)), Fraction(0)) for j in range(loops))

    soft_family = None
    if count:
        soft_lines = [
            ((*changed(i)[:count], *_momentum(family, i)[loops:]), family.lines[i].mass2) for i in soft
        ]
        soft_family = family_of_momenta(
            family.name,
            family.dimension,
            family.loops[:count],
            family.external,
            family.gram,
            family.kinematic_ring,
            soft_lines,
        )
    return Region(
        loops - count, hard, soft, soft_family, tuple(changed(i)[count:] for i in hard), abs(determinant)
    )


def _inverse(rows: Sequence[Vector]) -> tuple[list[list[Fraction]], Fraction]:
    """Inverse and determinant of a square matrix."""
    n = len(rows)
    work = [[*row, *(Fraction(int(i == j)) for j in range(n))] for i, row in enumerate(rows)]
    determinant = Fraction(1)
    for column in range(n):
        pivot = next(r for r in range(column, n) if work[r][column])
        if pivot != column:
            work[column], work[pivot] = work[pivot], work[column]
            determinant = -determinant
        head = work[column][column]
        determinant *= head
        work[column] = [value / head for value in work[column]]
        for r in range(n):
            if r != column and work[r][column]:
                factor = work[r][column]
                work[r] = [a - factor * b for a, b in zip(work[r], work[column], strict=True)]
    return [row[n:] for row in work], determinant


@dataclass(frozen=True)
class Vacuum:
    """``factor * integral`` of a family of vacuum integrals at unit mass."""

    factor: int
    family: FamilyDefinition
    powers: Powers


def vacuum(family: FamilyDefinition, heavy: int, region: Region, powers: Powers) -> tuple[Vacuum, ...]:
    """The hard part of an integral in a region with hard loops, as a sum; empty where it vanishes.

    Parameters
    ----------
    family, heavy, region
        As for `regions`.
    powers
        Powers of all lines of the family, none negative.
    """
    mass = powers[heavy]
    if mass == 0:
        return ()
    massless: dict[Vector, int] = {}
    heavy_momentum: Vector = ()
    for line, momentum in zip(region.hard, region.hard_momenta, strict=True):
        lead = next(c for c in momentum if c)
        direction = momentum if lead > 0 else tuple(-c for c in momentum)
        if line == heavy:
            heavy_momentum = direction
        elif powers[line]:
            massless[direction] = massless.get(direction, 0) + powers[line]
    along = massless.pop(heavy_momentum, 0)
    numbers = ring(())
    lines = [(heavy_momentum, numbers.one), *((q, numbers.zero) for q in massless)]
    names = [f"k{i + 1}" for i in range(region.loops)]
    of_vacuum = family_of_momenta(
        f"{family.name}, hard part", family.dimension, names, (), (), numbers, lines
    )
    if _is_scaleless(of_vacuum):
        return ()
    # 1/((1 - q^2)^a (-q^2)^b) in partial fractions; without the massive line the integral vanishes
    found = []
    for power in range(1, mass + 1):
        factor = (-1) ** along * comb(along + mass - power - 1, mass - power) if along else int(power == mass)
        if factor:
            others = [power, *massless.values()]
            others += [0] * (len(of_vacuum.lines) - len(others))
            found.append(Vacuum(factor, of_vacuum, tuple(others)))
    return tuple(found)


def _is_scaleless(family: FamilyDefinition) -> bool:
    everything = sum(1 << i for i in family.propagators)
    return everything in zero_sectors_of(family_terms(family), family.propagators)
