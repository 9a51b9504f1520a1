"""Kinematic points: which sheet and phase the values of the invariants mean.

With the Euclidean signs e_v (F is positive where every ``y_v = e_v v`` is positive), each line's -i0 makes
a negative y_v mean ``y_v - i0 = |v| exp(-i pi)``: a positive invariant s of Euclidean sign -1 has +i0.
The ratios are ``x_v = y_v / y_u^(dim v/dim u)``, u the unit.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import dataclass
from difflib import get_close_matches
from fractions import Fraction

from ibpred.errors import InputError, PointError
from ibpred.numerics.forms.path import Target


@dataclass(frozen=True)
class KinematicPoint:
    """A point in the kinematic space with its prescriptions.

    Attributes
    ----------
    values
        The invariants.
    unit
        ``y_u`` as modulus and phase (0 or -1 half turns); one where there is no unit.
    ratios
        ``x_v`` for every invariant but the unit, in the given order.
    """

    values: Mapping[str, Fraction]
    unit: Target
    ratios: Mapping[str, Target]


def kinematic_point(
    values: Mapping[str, Fraction],
    signs: Mapping[str, int],
    unit: str | None,
    dimensions: Mapping[str, int],
    masses: Collection[str] = (),
) -> KinematicPoint:
    """Read a point.

    Parameters
    ----------
    values
        Exact values of all invariants and squared masses.
    signs
        Euclidean sign of each invariant.
    unit
        The invariant that is set to one inside.
    dimensions
        Mass dimension of each invariant.
    masses
        Those that are squared masses: positive, no prescription.

    Raises
    ------
    PointError
        If invariants are missing, unknown or zero, a squared mass is negative, or the phases of the
        invariants leave the principal sheet.
    InputError
        If an invariant's dimension is no multiple of the unit's.
    """
    kept = checked_values(values, signs, masses)
    phases = {name: 0 if sign * kept[name] > 0 else -1 for name, sign in signs.items()}
    if unit is None:
        return KinematicPoint(kept, Target(Fraction(1), 0), {})
    size = abs(values[unit])
    ratios = {}
    for name in signs:
        if name == unit:
            continue
        power, rest = divmod(dimensions[name], dimensions[unit])
        if rest:
            raise InputError(
                f"the mass dimension {dimensions[name]} of {name} is no multiple of that of the unit {unit}, "
                f"{dimensions[unit]}; choose another unit"
            )
        turns = phases[name] - power * phases[unit]
        if abs(turns) > 1:
            raise PointError(
                f"at {name} = {values[name]}, {unit} = {values[unit]} the ratio {name}/{unit}^{power} leaves "
                "the principal sheet; choose another unit"
            )
        ratios[name] = Target(abs(values[name]) / size**power, turns)
    return KinematicPoint(kept, Target(size, phases[unit]), ratios)


def checked_values(
    values: Mapping[str, Fraction], known: Collection[str], masses: Collection[str]
) -> dict[str, Fraction]:
    """The values of all invariants, in the order of those known.

    Raises
    ------
    PointError
        If invariants are missing, unknown or zero, or a squared mass is negative.
    """
    for name in values:
        if name not in known:
            near = get_close_matches(name, known, n=1)
            hint = f"did you mean {near[0]!r}?" if near else f"known are {', '.join(known) or 'none'}"
            raise PointError(f"the point gives a value for an unknown invariant {name!r}; {hint}")
    missing = [name for name in known if name not in values]
    if missing:
        raise PointError(f"the point lacks a value for {', '.join(missing)}; give every invariant")
    for name in known:
        value = values[name]
        if value == 0:
            raise PointError(f"the point is singular: {name} = 0; choose another value")
        if name in masses and value < 0:
            raise PointError(f"the squared mass {name} = {value} is negative; give a positive value")
    return {name: values[name] for name in known}
