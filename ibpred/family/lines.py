"""The lines of a family: from forms in the momenta to records, their rank, missing numerators."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction

from ibpred.exact.rational import Rational
from ibpred.family.definition import Line
from ibpred.family.momenta import Form, Momenta, momentum_text, number, vector

Gram = tuple[tuple[Rational, ...], ...]


@dataclass(frozen=True)
class Space:
    """The momenta that lines are made of.

    Attributes
    ----------
    momenta
        Loop momenta first, then the external ones.
    loops, external
        Their names.
    dimensions
        Mass dimensions of the external momenta.
    gram
        Scalar products of the external momenta.
    """

    momenta: Momenta
    loops: tuple[str, ...]
    external: tuple[str, ...]
    dimensions: tuple[int, ...]
    gram: Gram

    @property
    def products(self) -> int:
        """Number of scalar products with a loop momentum."""
        count = len(self.loops)
        return count * (count + 1) // 2 + count * len(self.external)


def line_from_form(
    form: Form,
    space: Space,
    *,
    text: str,
    momentum: tuple[Fraction, ...] | None,
    mass2: Rational,
    dimension: int,
    cut: bool,
    numerator: bool,
) -> Line:
    """The record of a line ``D = form``.

    Raises
    ------
    ValueError
        If a product with a loop momentum has a coefficient that is no number.
    """
    quadratic = tuple(
        tuple(form.coefficient(a, b).to_fraction() / (1 if i == j else 2) for j, b in enumerate(space.loops))
        for i, a in enumerate(space.loops)
    )
    linear = tuple(tuple(form.coefficient(a, p).to_fraction() for p in space.external) for a in space.loops)
    constant = form.coefficient()
    for e, a in enumerate(space.external):
        for f, b in enumerate(space.external[: e + 1]):
            coefficient = form.coefficient(a, b)
            if coefficient:
                constant = constant + coefficient * space.gram[e][f]
    return Line(text, momentum, quadratic, linear, constant, mass2, cut, numerator, dimension)


def square_line(
    momentum: Sequence[Fraction], mass2: Rational, space: Space, *, text: str, cut: bool, numerator: bool
) -> Line:
    """The line ``mass2 - q^2`` with q given over the loop and external momenta."""
    names = (*space.loops, *space.external)
    q = vector(space.momenta, dict(zip(names, momentum, strict=True)))
    form = number(space.momenta, mass2) - q**2
    return line_from_form(
        form,
        space,
        text=text,
        momentum=tuple(momentum),
        mass2=mass2,
        dimension=2,
        cut=cut,
        numerator=numerator,
    )


def product_row(line: Line) -> tuple[Fraction, ...]:
    """Coefficients of the line over the products k_i.k_j (i <= j) and k_i.p_e."""
    count = len(line.quadratic)
    squares = [line.quadratic[i][j] * (1 if i == j else 2) for i in range(count) for j in range(i, count)]
    return (*squares, *(c for row in line.linear for c in row))


class RowSpace:
    """Rows over Q, added one by one; each dependent row is expressed by the independent ones."""

    def __init__(self) -> None:
        self._rows: list[tuple[int, list[Fraction], dict[int, Fraction]]] = []
        self.size = 0

    def add(self, row: Sequence[Fraction]) -> dict[int, Fraction] | None:
        """Add a row; where it depends on earlier independent ones, the combination that equals it.

        Rows that turn out dependent are not kept and get no number.
        """
        rest = list(row)
        made_of: dict[int, Fraction] = {}
        for pivot, known, origin in self._rows:
            factor = rest[pivot]
            if factor:
                rest = [a - factor * b for a, b in zip(rest, known, strict=True)]
                for key, value in origin.items():
                    made_of[key] = made_of.get(key, Fraction(0)) + factor * value
        pivot = next((i for i, a in enumerate(rest) if a), -1)
        if pivot < 0:
            return {key: value for key, value in sorted(made_of.items()) if value}
        head = rest[pivot]
        origin = {key: -value / head for key, value in made_of.items() if value}
        origin[self.size] = 1 / head
        self._rows.append((pivot, [a / head for a in rest], origin))
        self.size += 1
        return None


def completed(lines: Sequence[Line], space: Space) -> tuple[Line, ...]:
    """Lines with the missing numerators appended.

    The numerators are ``-q^2`` with q, in this order of preference: a loop momentum; a difference of two;
    a loop momentum shifted as in some line of the family; a loop momentum plus one external momentum
    (times it, where the external momentum has no mass dimension one). Those that add nothing new are skipped.
    """
    known = RowSpace()
    for line in lines:
        known.add(product_row(line))
    result = list(lines)
    for candidate in _candidates(lines, space):
        if known.size == space.products:
            break
        if known.add(product_row(candidate)) is None:
            result.append(candidate)
    return tuple(result)


def _candidates(lines: Sequence[Line], space: Space) -> Iterator[Line]:
    loops, names = len(space.loops), (*space.loops, *space.external)
    zero = space.momenta.ring.zero

    def square(momentum: Sequence[Fraction]) -> Line:
        text = momentum_text(names, momentum)
        return square_line(momentum, zero, space, text=text, cut=False, numerator=True)

    def unit(i: int) -> list[Fraction]:
        return [Fraction(int(i == j)) for j in range(len(names))]

    for i in range(loops):
        yield square(unit(i))
    for i in range(loops):
        for j in range(i + 1, loops):
            yield square([a - b for a, b in zip(unit(i), unit(j), strict=True)])
    shifts = _shifts(lines, loops)
    for i in range(loops):
        for shift in shifts:
            yield square([*unit(i)[:loops], *shift])
    for i in range(loops):
        for e, name in enumerate(space.external):
            if space.dimensions[e] == 1:
                yield square([a + b for a, b in zip(unit(i), unit(loops + e), strict=True)])
            else:
                k, p = vector(space.momenta, {names[i]: 1}), vector(space.momenta, {name: 1})
                yield line_from_form(
                    -(k * p),
                    space,
                    text=f"-{names[i]}*{name}",
                    momentum=None,
                    mass2=zero,
                    dimension=1 + space.dimensions[e],
                    cut=False,
                    numerator=True,
                )


def _shifts(lines: Sequence[Line], loops: int) -> list[tuple[Fraction, ...]]:
    """External parts of the lines with one loop momentum, relative to it, in file order."""
    found: list[tuple[Fraction, ...]] = []
    for line in lines:
        if line.momentum is None:
            continue
        inside = [c for c in line.momentum[:loops] if c]
        if len(inside) == 1 and abs(inside[0]) == 1:
            shift = tuple(c * inside[0] for c in line.momentum[loops:])
            if any(shift) and shift not in found:
                found.append(shift)
    return found
