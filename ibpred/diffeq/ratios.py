"""The differential system in dimensionless ratios and eps."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from ibpred.diffeq.system import DifferentialSystem
from ibpred.errors import InputError
from ibpred.exact.rational import Rational, Ring, ring
from ibpred.sectors.order import sector_of

DenseMatrix = tuple[tuple[Rational, ...], ...]

_LETTERS = ("x", "y", "z")


@dataclass(frozen=True)
class DimensionlessSystem:
    """``d I / d x = A_x(eps, x) I`` at ``unit = sign``, ``v = sign_v x_v``, ``d = d0 - 2 eps``.

    Attributes
    ----------
    ratios
        Names of the ratios, one for each invariant but the unit.
    definitions
        For each ratio its definition, e.g. ``t/s`` or ``-s/m2``.
    invariants
        For each ratio the invariant it stands for.
    signs
        The sign of every invariant in the region where the unit has modulus one and all ratios are
        positive.
    ring
        Q(eps, ratios).
    matrices
        For each ratio a dense n x n matrix over `ring`.
    blocks
        Number of masters of each sector, in the order of the masters.
    """

    ratios: tuple[str, ...]
    definitions: tuple[str, ...]
    invariants: tuple[str, ...]
    signs: Mapping[str, int]
    ring: Ring
    matrices: Mapping[str, DenseMatrix]
    blocks: tuple[int, ...]


def ratio_names(count: int, taken: tuple[str, ...]) -> tuple[str, ...]:
    """``x``, ``y``, ``z``, ``x4``, ``x5``, ... but none of the names taken."""
    found: list[str] = []
    number = 1
    while len(found) < count:
        name = _LETTERS[number - 1] if number <= len(_LETTERS) else f"x{number}"
        if name not in taken:
            found.append(name)
        number += 1
    return tuple(found)


def dimensionless(system: DifferentialSystem, signs: Mapping[str, int]) -> DimensionlessSystem:
    """Set the unit to its sign and pass to ratios that are positive in the region of the signs.

    Parameters
    ----------
    system
        The differential equations.
    signs
        +1 or -1 for every invariant, e.g. those of the Euclidean region.

    Raises
    ------
    InputError
        If a sign is missing, or an invariant's dimension is no multiple of the unit's.
    """
    for name in system.variables:
        if signs.get(name) not in (1, -1):
            raise InputError(f"{system.family}: the sign of {name} must be 1 or -1 to form ratios")
    others = tuple(name for name in system.variables if name != system.unit)
    names = ratio_names(len(others), ("d", "eps", *system.variables))
    target = ring(("eps", *names))
    sizes = dict(zip(system.variables, system.dimensions, strict=True))
    images = {"d": target.variable("eps") * -2 + system.dimension}
    if system.unit is not None:
        images[system.unit] = target.constant(signs[system.unit])
    definitions = []
    for ratio, name in zip(names, others, strict=True):
        images[name] = target.variable(ratio) * signs[name]
        definitions.append(_definition(system, name, sizes, signs))
    count = len(system.masters)
    matrices: dict[str, DenseMatrix] = {}
    for ratio, name in zip(names, others, strict=True):
        dense = [[target.zero] * count for _ in range(count)]
        for row, column, value in system.matrices.get(name, ()):
            dense[row][column] = value.substitute(images) * signs[name]
        matrices[ratio] = tuple(map(tuple, dense))
    return DimensionlessSystem(
        names, tuple(definitions), others, dict(signs), target, matrices, sector_blocks(system)
    )


def _definition(
    system: DifferentialSystem, name: str, sizes: Mapping[str, int], signs: Mapping[str, int]
) -> str:
    if system.unit is None or sizes[name] == 0:
        return name if signs[name] > 0 else f"-{name}"
    power, rest = divmod(sizes[name], sizes[system.unit])
    if rest:
        raise InputError(
            f"{system.family}: the dimension of {name} is no multiple of that of the unit {system.unit}"
        )
    sign = signs[name] * signs[system.unit] ** power
    below = system.unit if power == 1 else f"{system.unit}^{power}"
    return f"{'-' if sign < 0 else ''}{name}/{below}"


def sector_blocks(system: DifferentialSystem) -> tuple[int, ...]:
    """Number of masters of each sector, in the order of the masters."""
    sizes: list[int] = []
    last: int | None = None
    for powers in system.masters:
        sector = sector_of(powers)
        if sector == last:
            sizes[-1] += 1
        else:
            sizes.append(1)
        last = sector
    return tuple(sizes)
