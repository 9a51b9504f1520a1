"""Families at a numeric kinematic point, with a mass added to a line, or with lines taken away."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from difflib import get_close_matches
from fractions import Fraction

from ibpred.errors import PointError, UnfinishedError
from ibpred.exact.rational import Rational, Ring, ring
from ibpred.family.cuts import refuse_cuts
from ibpred.family.definition import FamilyDefinition, Invariant, Line
from ibpred.family.lines import Space, completed, square_line
from ibpred.family.momenta import Momenta, momentum_text

MASS = "eta"
"""Name of the auxiliary squared mass."""


def at_point(family: FamilyDefinition, point: Mapping[str, Fraction]) -> FamilyDefinition:
    """The family with numbers for its invariants; nothing is left to scale, so it has no unit.

    Raises
    ------
    PointError
        If the point is incomplete, names unknown invariants, or the kinematics is singular there.
    """
    known = [invariant.name for invariant in family.invariants]
    for name in point:
        if name not in known:
            near = get_close_matches(name, known, n=1)
            hint = f"did you mean {near[0]!r}?" if near else f"known are {', '.join(known) or 'none'}"
            raise PointError(f"the point gives a value for an unknown invariant {name!r}; {hint}")
    missing = [name for name in known if name not in point]
    if missing:
        raise PointError(f"the point lacks a value for {', '.join(missing)}; give every invariant")
    numbers = ring(())
    values = {name: numbers.constant(point[name]) for name in known}

    def number(value: Rational) -> Rational:
        try:
            return value.substitute(values) if known else value.to_ring(numbers)
        except ZeroDivisionError:
            raise PointError(f"the kinematics is singular there: {value} has a pole") from None

    lines = tuple(
        replace(line, constant=number(line.constant), mass2=number(line.mass2)) for line in family.lines
    )
    gram = tuple(tuple(number(value) for value in row) for row in family.gram)
    return replace(family, invariants=(), unit=None, gram=gram, lines=lines, graph=None, crossings=())


def check_lines(family: FamilyDefinition) -> None:
    """Check that all lines that can have positive powers are ``m2 - q^2`` or linear in the loop momenta.

    Raises
    ------
    UnfinishedError
        Otherwise, or if lines are cut.
    """
    refuse_cuts(family)
    for number, line in enumerate(family.lines, start=1):
        if not line.numerator and line.momentum is None and any(map(any, line.quadratic)):
            raise UnfinishedError(
                f"{family.name}: line {number} ({line.text}) is given by an expression with products of loop "
                "momenta; the auxiliary-mass method needs it as a momentum and a mass2"
            )


def with_mass(family: FamilyDefinition, heavy: int) -> FamilyDefinition:
    """The auxiliary squared mass added to one line of a family at a numeric point."""
    target = ring((MASS,))

    def moved(line: Line, place: int) -> Line:
        extra = target.variable(MASS) if place == heavy else target.zero
        return replace(
            line, constant=line.constant.to_ring(target) + extra, mass2=line.mass2.to_ring(target) + extra
        )

    return replace(
        family,
        invariants=(Invariant(MASS, 2),),
        gram=tuple(tuple(value.to_ring(target) for value in row) for row in family.gram),
        lines=tuple(moved(line, place) for place, line in enumerate(family.lines)),
    )


def restricted(family: FamilyDefinition, sector: int) -> FamilyDefinition:
    """The family with the lines outside a sector as numerators only."""
    return replace(
        family,
        lines=tuple(
            line if sector >> i & 1 else replace(line, numerator=True) for i, line in enumerate(family.lines)
        ),
    )


def family_of_momenta(
    name: str,
    dimension: int,
    loops: Sequence[str],
    external: Sequence[str],
    gram: tuple[tuple[Rational, ...], ...],
    field: Ring,
    lines: Sequence[tuple[tuple[Fraction, ...], Rational]],
) -> FamilyDefinition:
    """A family from the momenta (over loop and external momenta) and squared masses of its lines.

    Missing numerators are completed.
    """
    names = (*loops, *external)
    momenta = Momenta(names, field)
    space = Space(momenta, tuple(loops), tuple(external), (1,) * len(external), gram)
    given = [
        square_line(q, mass2, space, text=momentum_text(names, q), cut=False, numerator=False)
        for q, mass2 in lines
    ]
    return FamilyDefinition(
        name,
        "",
        tuple(loops),
        tuple(external),
        (),
        None,
        dimension,
        gram,
        completed(given, space),
        None,
    )
