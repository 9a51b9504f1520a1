"""The differential system in dimensionless ratios and eps."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from ibpred.diffeq.system import DifferentialSystem
from ibpred.errors import InputError
from ibpred.exact.rational import Rational, Ring, ring
from ibpred.family.definition import VariableChange
from ibpred.sectors.order import sector_of

DenseMatrix = tuple[tuple[Rational, ...], ...]

_LETTERS = ("x", "y", "z")


@dataclass(frozen=True)
class Coordinates:
    """Dimensionless variables for the kinematic space, the unit at plus or minus one.

    Attributes
    ----------
    names
        The variables, one for each invariant but the unit.
    definitions
        For each of them what it means, e.g. ``t/s`` or ``-s/m2``, or an equation such as
        ``s = -m2*(1-x)^2/x``.
    ring
        Q(eps, variables).
    values
        Every invariant in terms of the variables, in `ring`.
    """

    names: tuple[str, ...]
    definitions: tuple[str, ...]
    ring: Ring
    values: Mapping[str, Rational]


@dataclass(frozen=True)
class DimensionlessSystem:
    """``d I / d x = A_x(eps, x) I`` in dimensionless variables, ``d = d0 - 2 eps``.

    Attributes
    ----------
    coordinates
        The variables and what they mean.
    matrices
        For each variable a dense n x n matrix over the ring of the coordinates.
    blocks
        Number of masters of each sector, in the order of the masters.
    """

    coordinates: Coordinates
    matrices: Mapping[str, DenseMatrix]
    blocks: tuple[int, ...]

    @property
    def ratios(self) -> tuple[str, ...]:
        """Names of the variables."""
        return self.coordinates.names

    @property
    def definitions(self) -> tuple[str, ...]:
        """What the variables mean."""
        return self.coordinates.definitions

    @property
    def ring(self) -> Ring:
        """Q(eps, variables)."""
        return self.coordinates.ring


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


def ratio_coordinates(
    system: DifferentialSystem, signs: Mapping[str, int], changes: Sequence[VariableChange] = ()
) -> Coordinates:
    """Ratios that are positive in the region of the signs, or the user's variables in place of some of them.

    Parameters
    ----------
    system
        The differential equations.
    signs
        +1 or -1 for every invariant, e.g. those of the Euclidean region.
    changes
        The user's variables, each instead of the ratio of one invariant.

    Raises
    ------
    InputError
        If a sign is missing, or an invariant's dimension is no multiple of the unit's.
    """
    for name in system.variables:
        if signs.get(name) not in (1, -1):
            raise InputError(f"{system.family}: the sign of {name} must be 1 or -1 to form ratios")
    others = tuple(name for name in system.variables if name != system.unit)
    chosen = {change.invariant: change for change in changes}
    taken = ("d", "eps", *system.variables, *(change.name for change in changes))
    free = iter(ratio_names(len(others), taken))
    names = tuple(chosen[name].name if name in chosen else next(free) for name in others)
    target = ring(("eps", *names))
    sizes = dict(zip(system.variables, system.dimensions, strict=True))
    values: dict[str, Rational] = {}
    if system.unit is not None:
        values[system.unit] = target.constant(signs[system.unit])
    definitions = []
    for ratio, name in zip(names, others, strict=True):
        if name in chosen:
            definitions.append(f"{name} = {chosen[name].text}")
        else:
            values[name] = target.variable(ratio) * signs[name]
            definitions.append(_definition(system, name, sizes, signs))
    for change in changes:
        images = {name: values[name] for name in change.value.variables() if name in values}
        images |= {name: target.variable(name) for name in change.value.variables() if name in names}
        values[change.invariant] = change.value.substitute(images)
    return Coordinates(names, tuple(definitions), target, values)


def changed(
    coordinates: Coordinates, names: Sequence[str], images: Sequence[Rational], partners: Sequence[str]
) -> Coordinates:
    """Replace the variables by functions of new ones.

    Parameters
    ----------
    coordinates
        The variables so far.
    names
        The new variables, in their order.
    images
        The old variables, in order, in terms of the new ones, in the ring ``("eps", *names)``.
    partners
        For each old variable the new one whose definition tells its image.
    """
    target = ring(("eps", *names))
    inserted = dict(zip(coordinates.names, images, strict=True))
    values = {name: v.substitute(inserted).to_ring(target) for name, v in coordinates.values.items()}
    texts = {}
    for old, before, partner in zip(coordinates.names, coordinates.definitions, partners, strict=True):
        text = inserted[old].factored_text()
        if old == partner and inserted[old] == target.variable(old):
            texts[partner] = before
        elif "=" in before:
            texts[partner] = f"{old} = {text}, {before}"
        else:
            texts[partner] = f"{before} = {text}"
    return Coordinates(tuple(names), tuple(texts[name] for name in names), target, values)


def dimensionless(system: DifferentialSystem, coordinates: Coordinates) -> DimensionlessSystem:
    """The equations in dimensionless variables, by the chain rule.

    Parameters
    ----------
    system
        The differential equations.
    coordinates
        The invariants as functions of the variables.
    """
    target = coordinates.ring
    images = {"d": target.variable("eps") * -2 + system.dimension, **coordinates.values}
    count = len(system.masters)
    dense = {name: [[target.zero] * count for _ in range(count)] for name in coordinates.names}
    for invariant, value in coordinates.values.items():
        slopes = {name: value.derivative(name) for name in coordinates.names}
        used = {name: slope for name, slope in slopes.items() if slope}
        if not used:
            continue
        for row, column, entry in system.matrices.get(invariant, ()):
            here = entry.substitute(images)
            for name, slope in used.items():
                dense[name][row][column] = dense[name][row][column] + here * slope
    matrices = {name: tuple(map(tuple, rows)) for name, rows in dense.items()}
    return DimensionlessSystem(coordinates, matrices, sector_blocks(system))


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
