"""Dimensional analysis: mass dimensions of integrals, and the unit invariant set to one and restored."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from ibpred.errors import InputError
from ibpred.exact.rational import Polynomial, Rational
from ibpred.family.definition import FamilyDefinition, Powers


def integral_dimension(family: FamilyDefinition, powers: Sequence[int]) -> tuple[int, int]:
    """Mass dimension of an integral.

    Returns
    -------
    (constant, slope)
        The dimension is ``constant + slope * eps`` with ``L d - sum_i a_i dim(D_i)``, d = d0 - 2 eps.

    Raises
    ------
    InputError
        If there is not one power for each line.
    """
    if len(powers) != len(family.lines):
        raise InputError(f"{family.name} has {len(family.lines)} lines, {len(powers)} powers are given")
    of_lines = sum(a * line.dimension for a, line in zip(powers, family.lines, strict=True))
    return len(family.loops) * family.dimension - of_lines, -2 * len(family.loops)


def restore_unit(value: Rational, dimension: int, family: FamilyDefinition) -> Rational:
    """Undo ``unit = 1``: the homogeneous function of the given mass dimension.

    Parameters
    ----------
    value
        In the family's internal ring.
    dimension
        Mass dimension of the result.

    Returns
    -------
    Rational
        ``unit^(dimension/dim) value(v / unit^(dim_v/dim))`` in the full ring.

    Raises
    ------
    InputError
        If there is no function of that dimension: it is no multiple of the unit's and the value is not
        zero, or it is not zero and there is no unit.
    """
    target = family.full_ring
    if not value:
        return target.zero
    if family.unit is None:
        if dimension:
            raise InputError(f"{family.name} has no unit, so nothing has the mass dimension {dimension}")
        return value.to_ring(target)
    dimensions = {invariant.name: invariant.dimension for invariant in family.invariants}
    own = dimensions[family.unit]
    if dimension % own:
        raise InputError(
            f"the mass dimension {dimension} is no multiple of that of the unit {family.unit}, {own}; "
            "choose another unit"
        )
    source = value.ring.names
    weights = [0 if name == "d" else dimensions[name] // own for name in source]
    places = [target.index(name) for name in source]
    at = target.index(family.unit)

    def homogeneous(polynomial: Polynomial) -> tuple[Polynomial, int]:
        """The polynomial made homogeneous with powers of the unit, and its weight."""
        terms = {tuple(int(e) for e in exponents): c for exponents, c in polynomial.to_dict().items()}
        weight = {e: sum(w * n for w, n in zip(weights, e, strict=True)) for e in terms}
        total = max(weight.values())
        moved = {}
        for exponents, coefficient in terms.items():
            new = [0] * len(target.names)
            for place, exponent in zip(places, exponents, strict=True):
                new[place] = exponent
            new[at] = total - weight[exponents]
            moved[tuple(new)] = coefficient
        return target.context.from_dict(moved), total

    numerator, above = homogeneous(value.numerator)
    denominator, below = homogeneous(value.denominator)
    power = dimension // own - above + below
    unit = target.context.gens()[at]
    if power >= 0:
        numerator = numerator * unit**power
    else:
        denominator = denominator * unit**-power
    # coprime polynomials stay coprime when made homogeneous, and neither is divisible by the unit; only the
    # sign convention may have to be restored, since another term may lead now
    if denominator.leading_coefficient() < 0:
        numerator, denominator = -numerator, -denominator
    return Rational(target, numerator, denominator)


def set_unit(value: Rational, family: FamilyDefinition) -> Rational:
    """Set the unit to one.

    Parameters
    ----------
    value
        In the family's full ring or kinematic ring.

    Returns
    -------
    Rational
        In the internal ring.

    Raises
    ------
    ZeroDivisionError
        If the denominator vanishes there.
    """
    target = family.internal_ring
    if family.unit is None:
        return value.to_ring(target)
    images = {family.unit: target.one}
    images |= {name: target.variable(name) for name in value.ring.names if name != family.unit}
    return value.substitute(images)


def unit_exponent(family: FamilyDefinition, powers: Powers) -> tuple[Fraction, Fraction]:
    """The mass dimension of an integral over that of the unit, as (A, B) of A + B eps."""
    constant, slope = integral_dimension(family, powers)
    if family.unit is None:
        return Fraction(0), Fraction(0)
    size = next(i.dimension for i in family.invariants if i.name == family.unit)
    return Fraction(constant, size), Fraction(slope, size)
