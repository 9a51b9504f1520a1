"""Integrals that are products of Gamma functions: loops done one after the other.

A loop momentum is taken that runs through few lines only; its integral is a known product of Gamma
functions times a power of one momentum square or mass, which is a line of the remaining integral. The
formulas are textbook material (e.g. V. A. Smirnov, Evaluating Feynman Integrals, 2004); the search works on
momenta, so no graph is needed.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from itertools import combinations

from ibpred.exact.rational import Rational
from ibpred.family.definition import FamilyDefinition

EpsLinear = tuple[Fraction, Fraction]
"""(a, b) for a + b eps."""


@dataclass(frozen=True)
class GammaForm:
    """``e^(L eps gamma_E) prefactor prod Gamma(numerator) / prod Gamma(denominator) prod scale^exponent``.

    Attributes
    ----------
    loops
        L.
    prefactor
        A rational number.
    numerator, denominator
        Arguments a + b eps of the Gamma functions, as pairs (a, b).
    scales
        (element of the kinematic ring that is positive in the Euclidean region, exponent p + q eps).
    """

    loops: int
    prefactor: Fraction
    numerator: tuple[EpsLinear, ...]
    denominator: tuple[EpsLinear, ...]
    scales: tuple[tuple[Rational, EpsLinear], ...]


@dataclass(frozen=True)
class _Line:
    """``1/(mass2 - q^2)^power``; momentum q over (remaining loop momenta, external momenta)."""

    momentum: tuple[Fraction, ...]
    mass2: Rational
    power: EpsLinear


@dataclass(frozen=True)
class _Factor:
    """What one integration leaves: Gamma functions, scales, and lines for the remaining integral."""

    numerator: tuple[EpsLinear, ...]
    denominator: tuple[EpsLinear, ...]
    scales: tuple[tuple[Rational, EpsLinear], ...] = ()
    lines: tuple[_Line, ...] = ()


def gamma_form(family: FamilyDefinition, powers: Sequence[int]) -> GammaForm | None:
    """The closed form of an integral, where loops can be done one after the other.

    Parameters
    ----------
    family
        The family.
    powers
        One power for each line.

    Returns
    -------
    GammaForm or None
        None where no order of the loops is found, where a numerator or a line given by an expression
        occurs, or where the integral is scaleless or has no unregulated value.
    """
    if any(power < 0 for power in powers):
        return None
    loops = len(family.loops)
    lines = []
    for line, power in zip(family.lines, powers, strict=True):
        if power == 0:
            continue
        if line.momentum is None:
            return None
        lines.append(_Line(tuple(line.momentum), line.mass2, (Fraction(power), Fraction(0))))
    form = _Search(family).integrate(tuple(lines), loops)
    if form is None:
        return None
    numerator, denominator = _cancelled(form.numerator, form.denominator)
    if any(b == 0 and a.denominator == 1 and a <= 0 for a, b in (*numerator, *denominator)):
        return None
    return GammaForm(loops, Fraction(1), numerator, denominator, _collected(form.scales))


def closed_forms(family: FamilyDefinition, masters: Sequence[Sequence[int]]) -> tuple[GammaForm | None, ...]:
    """The closed form of each master, None where there is none of this kind."""
    return tuple(gamma_form(family, powers) for powers in masters)


def _sum(*values: EpsLinear) -> EpsLinear:
    return sum((a for a, _ in values), Fraction(0)), sum((b for _, b in values), Fraction(0))


def _minus(value: EpsLinear) -> EpsLinear:
    return -value[0], -value[1]


def _cancelled(
    numerator: Sequence[EpsLinear], denominator: Sequence[EpsLinear]
) -> tuple[tuple[EpsLinear, ...], tuple[EpsLinear, ...]]:
    left = list(numerator)
    kept = []
    for argument in denominator:
        if argument in left:
            left.remove(argument)
        else:
            kept.append(argument)
    one = (Fraction(1), Fraction(0))
    return (
        tuple(sorted(a for a in left if a != one)),
        tuple(sorted(a for a in kept if a != one)),
    )


def _collected(
    scales: Sequence[tuple[Rational, EpsLinear]],
) -> tuple[tuple[Rational, EpsLinear], ...]:
    total: dict[Rational, EpsLinear] = {}
    for scale, exponent in scales:
        total[scale] = _sum(total.get(scale, (Fraction(0), Fraction(0))), exponent)
    kept = [(s, e) for s, e in total.items() if any(e) and not s.is_one()]
    return tuple(sorted(kept, key=lambda item: str(item[0])))


class _Search:
    """Depth-first search over the orders of integration in one family."""

    def __init__(self, family: FamilyDefinition) -> None:
        self.family = family
        self.half = (Fraction(family.dimension, 2), Fraction(-1))
        self.zero = family.kinematic_ring.zero

    def integrate(self, lines: tuple[_Line, ...], loops: int) -> _Factor | None:
        """All loops of ``prod lines``; None where no way is found."""
        lines = _merged(lines)
        inside = tuple(line for line in lines if any(line.momentum[:loops]))
        scales = []
        for line in lines:
            if line not in inside:
                square = line.mass2 - self.square(line.momentum[loops:])
                if not square:
                    return None
                scales.append((square, _minus(line.power)))
        if loops == 0:
            return _Factor((), (), tuple(scales))
        for factor, rest, remaining in self.steps(inside, loops):
            after = self.integrate((*rest, *factor.lines), remaining)
            if after is not None:
                return _Factor(
                    factor.numerator + after.numerator,
                    factor.denominator + after.denominator,
                    (*scales, *factor.scales, *after.scales),
                )
        return None

    def steps(self, lines: tuple[_Line, ...], loops: int) -> Iterator[tuple[_Factor, tuple[_Line, ...], int]]:
        """Ways to do one loop (or a two-loop vacuum): what it gives, the lines left, the loops left."""
        for direction in _directions(lines, loops):
            through: list[tuple[_Line, Fraction]] = []
            rest: list[tuple[_Line, Fraction]] = []
            for line in lines:
                along = _along(line, direction)
                (through if along else rest).append((line, along))
            if len({abs(along) for _, along in through}) != 1:
                continue
            size = abs(through[0][1])
            # normalise the direction so that every line through it carries the loop momentum once
            unit = tuple(v / size for v in direction)
            turned = tuple(
                line if along > 0 else replace(line, momentum=tuple(-c for c in line.momentum))
                for line, along in through
            )
            drop = max((i for i in range(loops) if unit[i]), key=lambda i: (abs(unit[i]) == 1, -i))
            factor = self.one_loop(turned, loops)
            if factor is None:
                continue
            jacobian = self.zero + abs(unit[drop])
            scales = (*factor.scales, (jacobian, (2 * self.half[0], 2 * self.half[1])))
            left = tuple(_without(line, drop) for line, _ in rest)
            new = tuple(_without(line, drop) for line in factor.lines)
            yield replace(factor, scales=scales, lines=new), left, loops - 1
        if loops == 2:
            vacuum = self.two_mass_vacuum(lines)
            if vacuum is not None:
                yield vacuum, (), 0

    def square(self, momentum: Sequence[Fraction]) -> Rational:
        """Square of an external momentum."""
        total = self.zero
        for e, a in enumerate(momentum):
            for f, b in enumerate(momentum):
                if a and b:
                    total = total + self.family.gram[e][f] * (a * b)
        return total

    def one_loop(self, lines: tuple[_Line, ...], loops: int) -> _Factor | None:
        """Integral over a momentum that each of the lines carries once."""
        massive = [line for line in lines if line.mass2]
        if not massive:
            return self.massless(lines, loops)
        if len(lines) == 1:
            return self.tadpole(lines[0].power, lines[0].mass2)
        if len(lines) != 2:
            return None
        difference = _difference(lines[0], lines[1])
        if any(difference[:loops]):
            return None
        square = self.square(difference[loops:])
        a, b = lines[0], lines[1]
        if len(massive) == 2:
            # equal masses at zero momentum square: as one line with the sum of the powers
            if square or a.mass2 != b.mass2:
                return None
            return self.tadpole(_sum(a.power, b.power), a.mass2)
        if a.mass2:
            a, b = b, a
        mass2, total = b.mass2, _sum(a.power, b.power)
        overall = _sum(total, _minus(self.half))
        scale = ((mass2, _minus(overall)),)
        if not square:
            above = (_sum(self.half, _minus(a.power)), overall)
            return _Factor(above, (self.half, b.power), scale)
        if square == mass2:
            above = (overall, _sum(self.half, self.half, _minus(total), _minus(a.power)))
            return _Factor(above, (b.power, _sum(self.half, self.half, _minus(total))), scale)
        return None

    def tadpole(self, power: EpsLinear, mass2: Rational) -> _Factor:
        """One massive line."""
        overall = _sum(power, _minus(self.half))
        return _Factor((overall,), (power,), ((mass2, _minus(overall)),))

    def massless(self, lines: tuple[_Line, ...], loops: int) -> _Factor | None:
        """Massless lines whose momenta differ by light-like ones, but for one pair.

        F has one term, x_i x_j (-P^2), so the parametric integral is Dirichlet's.
        """
        pairs = []
        for i, j in combinations(range(len(lines)), 2):
            difference = _difference(lines[i], lines[j])
            if any(difference[:loops]) or self.square(difference[loops:]):
                pairs.append((i, j, difference))
        if len(pairs) != 1:
            return None
        i, j, difference = pairs[0]
        total = _sum(*(line.power for line in lines))
        overall = _sum(total, _minus(self.half))
        above = [overall]
        for k, line in enumerate(lines):
            above.append(_sum(line.power, _minus(overall)) if k in (i, j) else line.power)
        below = [line.power for line in lines]
        below.append(_sum(self.half, self.half, _minus(total)))
        return _Factor(tuple(above), tuple(below), (), (_Line(difference, self.zero, overall),))

    def two_mass_vacuum(self, lines: tuple[_Line, ...]) -> _Factor | None:
        """Vacuum integral with two lines of equal mass and one massless line."""
        massive = [line for line in lines if line.mass2]
        if len(lines) != 3 or len(massive) != 2 or massive[0].mass2 != massive[1].mass2:
            return None
        light = next(line for line in lines if not line.mass2)
        ways = (
            tuple(s * x + t * y for x, y in zip(massive[0].momentum, massive[1].momentum, strict=True))
            for s in (1, -1)
            for t in (1, -1)
        )
        if light.momentum not in ways:
            return None
        p, q = massive[0].momentum, massive[1].momentum
        if abs(p[0] * q[1] - p[1] * q[0]) != 1:
            return None
        a, b, c, h = massive[0].power, massive[1].power, light.power, self.half
        overall = _sum(a, b, c, _minus(h), _minus(h))
        above = (overall, _sum(a, c, _minus(h)), _sum(b, c, _minus(h)), _sum(h, _minus(c)))
        below = (a, b, h, _sum(overall, c))
        return _Factor(above, below, ((massive[0].mass2, _minus(overall)),))


def _merged(lines: Sequence[_Line]) -> tuple[_Line, ...]:
    """Lines of equal momentum (up to sign) and mass as one, powers added; power zero dropped."""
    total: dict[tuple[tuple[Fraction, ...], Rational], EpsLinear] = {}
    for line in lines:
        lead = next((c for c in line.momentum if c), Fraction(1))
        momentum = line.momentum if lead > 0 else tuple(-c for c in line.momentum)
        key = (momentum, line.mass2)
        total[key] = _sum(total.get(key, (Fraction(0), Fraction(0))), line.power)
    return tuple(_Line(q, mass2, power) for (q, mass2), power in total.items() if any(power))


def _along(line: _Line, direction: Sequence[Fraction]) -> Fraction:
    return sum((c * v for c, v in zip(line.momentum, direction, strict=False)), Fraction(0))


def _difference(left: _Line, right: _Line) -> tuple[Fraction, ...]:
    return tuple(a - b for a, b in zip(left.momentum, right.momentum, strict=True))


def _without(line: _Line, place: int) -> _Line:
    return replace(line, momentum=(*line.momentum[:place], *line.momentum[place + 1 :]))


def _directions(lines: Sequence[_Line], loops: int) -> Iterator[tuple[Fraction, ...]]:
    """Directions in loop-momentum space along which some L - 1 independent lines do not change.

    Those with few lines running through come first.
    """
    found: dict[tuple[Fraction, ...], int] = {}
    for subset in combinations(lines, loops - 1):
        direction = _kernel([line.momentum[:loops] for line in subset], loops)
        if direction is not None and direction not in found:
            found[direction] = sum(1 for line in lines if _along(line, direction))
    yield from sorted(found, key=lambda v: (found[v], v))


def _kernel(rows: Sequence[Sequence[Fraction]], width: int) -> tuple[Fraction, ...] | None:
    """The one direction orthogonal to all rows, first component 1; None if it is not unique."""
    work = [list(row) for row in rows]
    pivots: list[int] = []
    for column in range(width):
        pivot = next((r for r in range(len(pivots), len(work)) if work[r][column]), None)
        if pivot is None:
            continue
        r = len(pivots)
        work[r], work[pivot] = work[pivot], work[r]
        work[r] = [value / work[r][column] for value in work[r]]
        for other in range(len(work)):
            if other != r and work[other][column]:
                factor = work[other][column]
                work[other] = [x - factor * y for x, y in zip(work[other], work[r], strict=True)]
        pivots.append(column)
    free = [column for column in range(width) if column not in pivots]
    if len(free) != 1:
        return None
    direction = [Fraction(0)] * width
    direction[free[0]] = Fraction(1)
    for r, column in enumerate(pivots):
        direction[column] = -work[r][free[0]]
    lead = next(v for v in direction if v)
    return tuple(v / lead for v in direction)
