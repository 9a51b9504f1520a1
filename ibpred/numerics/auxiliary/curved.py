"""Lines linear in the loop momenta, curved by a small quadratic term that is taken away again.

``D = c l.V + w`` with a sum l of loop momenta and a sum V of external ones becomes ``D - x l^2``, which is x
times an ordinary line ``m2 - q^2`` with ``q = l - c V/(2 x)``. At a fixed x the auxiliary mass gives such
integrals; their differential equations in x lead to x = 0 (Z.-F. Liu, Y.-Q. Ma, arXiv:2201.11636). There the
integrals wanted are the part with integer powers of x: where a loop momentum grows like a power of 1/x its
measure brings a power of x that depends on eps.

The engine wants numbers in front of products with loop momenta. So the external momenta of linear lines
absorb r = 1/x, and ``D = x D'`` has the line ``D' = c l.(r V) + r w - l^2``.
"""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

from ibpred.errors import UnfinishedError
from ibpred.exact.rational import Rational, Ring, ring
from ibpred.family.definition import FamilyDefinition, Invariant, Line, Powers
from ibpred.family.lines import Space, square_line
from ibpred.family.momenta import Momenta

FLATNESS = "r"
"""Name of the inverse of the coefficient of the quadratic term."""


def linear_lines(family: FamilyDefinition) -> tuple[int, ...]:
    """The lines, numerators included, that have no product of two loop momenta."""
    return tuple(i for i, line in enumerate(family.lines) if not any(map(any, line.quadratic)))


def has_linear_propagators(family: FamilyDefinition) -> bool:
    """Whether a line that can have positive powers is linear."""
    return any(not family.lines[i].numerator for i in linear_lines(family))


def curved(family: FamilyDefinition) -> FamilyDefinition:
    """The family at a numeric point with all linear propagators curved, in the variable r.

    The integrals are those of the lines D'; see `scaling`.

    Raises
    ------
    UnfinishedError
        If a linear line is no product of a loop and an external momentum, or if the external momenta of
        linear lines occur in other lines.
    """
    target = ring((FLATNESS,))
    linear = linear_lines(family)
    inside = sorted({e for i in linear for e in _external(family.lines[i])})
    for i, line in enumerate(family.lines):
        shared = [family.external[e] for e in _external(line) if e in inside]
        if i not in linear and shared:
            raise UnfinishedError(
                f"{family.name}: {', '.join(shared)} occurs in linear lines and in line {i + 1} "
                f"({line.text}); the auxiliary-mass method needs external momenta of their own there"
            )
    flat = target.variable(FLATNESS)
    gram = tuple(
        tuple(
            value.to_ring(target) * flat ** (int(e in inside) + int(f in inside))
            for f, value in enumerate(row)
        )
        for e, row in enumerate(family.gram)
    )
    momenta = Momenta((*family.loops, *family.external), target)
    space = Space(momenta, family.loops, family.external, (1,) * len(family.external), gram)
    lines = []
    for i, line in enumerate(family.lines):
        if i in linear and not line.numerator:
            lines.append(_curved_line(family, line, i + 1, space, target))
        else:
            constant = line.constant.to_ring(target) * (flat if i in linear else target.one)
            lines.append(replace(line, constant=constant, mass2=line.mass2.to_ring(target)))
    return replace(
        family, invariants=(Invariant(FLATNESS, 0),), unit=None, gram=gram, lines=tuple(lines), graph=None
    )


def scaling(family: FamilyDefinition, powers: Powers) -> int:
    """The power of r that takes an integral of the lines D' to the one of the lines D."""
    return sum(powers[i] for i in linear_lines(family))


def _external(line: Line) -> list[int]:
    """The external momenta that are multiplied by loop momenta."""
    return [e for e in range(len(line.linear[0])) if any(row[e] for row in line.linear)]


def _curved_line(family: FamilyDefinition, line: Line, number: int, space: Space, target: Ring) -> Line:
    lead = next(i for i, row in enumerate(line.linear) if any(row))
    outer = line.linear[lead]
    first = next(e for e, value in enumerate(outer) if value)
    inner = tuple(row[first] / outer[first] for row in line.linear)
    if any(row[e] != inner[i] * outer[e] for i, row in enumerate(line.linear) for e in range(len(outer))):
        raise UnfinishedError(
            f"{family.name}: line {number} ({line.text}) is no product of one loop and one external momentum;"
            " the auxiliary-mass method needs linear lines that are"
        )
    half = tuple(-value / 2 for value in outer)
    mass2: Rational = line.constant.to_ring(target) * target.variable(FLATNESS)
    for e, a in enumerate(half):
        for f, b in enumerate(half):
            mass2 = mass2 + space.gram[e][f] * Fraction(a * b)
    return square_line((*inner, *half), mass2, space, text=line.text, cut=False, numerator=False)
