"""Crossings: families whose external momenta are exchanged, and what that makes of the invariants."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import replace
from fractions import Fraction

import flint

from ibpred.errors import ExpressionError
from ibpred.exact.grammar import nearest
from ibpred.exact.rational import Rational, Ring
from ibpred.family.definition import Crossing, FamilyDefinition
from ibpred.family.lines import Gram
from ibpred.family.momenta import Momenta, parse_form
from ibpred.family.source import Source

Rows = tuple[tuple[Fraction, ...], ...]

_NAME = re.compile(r"[A-Za-z_][A-Za-z_0-9]*\Z")


class NoCrossingError(Exception):
    """A substitution of the external momenta that no substitution of the invariants undoes."""


def crossed(family: FamilyDefinition, crossing: Crossing) -> FamilyDefinition:
    """The family whose integrals are those of `family` after a crossing.

    Its name is ``family.crossing``, its kinematics are those of `family`:
    ``I_crossed(a; v) = I(a; crossing.invariants(v))``.
    """
    names = [invariant.name for invariant in family.invariants]
    images = dict(zip(names, crossing.invariants, strict=True))
    legs = range(len(family.external))
    lines = []
    for line in family.lines:
        linear = tuple(
            tuple(sum((row[e] * crossing.momenta[e][f] for e in legs), Fraction(0)) for f in legs)
            for row in line.linear
        )
        momentum = line.momentum
        if momentum is not None:
            loops = len(family.loops)
            outer = tuple(
                sum((momentum[loops + e] * crossing.momenta[e][f] for e in legs), Fraction(0)) for f in legs
            )
            momentum = (*momentum[:loops], *outer)
        lines.append(
            replace(
                line,
                momentum=momentum,
                linear=linear,
                constant=line.constant.substitute(images),
                mass2=line.mass2.substitute(images),
            )
        )
    return replace(
        family, name=f"{family.name}.{crossing.name}", lines=tuple(lines), graph=None, crossings=()
    )


def induced_substitution(momenta: Rows, gram: Gram, ring: Ring) -> tuple[Rational, ...]:
    """What a substitution of the external momenta makes of the invariants.

    Returns
    -------
    tuple of Rational
        The images v' with ``gram(v') = R gram(v) R^T``; invariants that are in no product stay.

    Raises
    ------
    NoCrossingError
        If R cannot be inverted, changes the square of a leg, or leads to products that no values
        of the invariants give.
    """
    size = len(momenta)
    table = flint.fmpq_mat([[flint.fmpq(x.numerator, x.denominator) for x in row] for row in momenta])
    if size and not table.det():
        raise NoCrossingError("it cannot be undone: the new momenta are linearly dependent")
    new = [[_product(gram, momenta[e], momenta[f], ring) for f in range(size)] for e in range(size)]
    total = tuple(sum((row[f] for row in momenta), Fraction(0)) for f in range(size))
    all_legs = (Fraction(1),) * size
    for e in range(size):
        if new[e][e] != gram[e][e]:
            raise NoCrossingError(
                f"it changes the kinematics: the square of external momentum {e + 1} was {gram[e][e]}, "
                f"it becomes {new[e][e]}"
            )
    before, after = _product(gram, all_legs, all_legs, ring), _product(gram, total, total, ring)
    if before != after:
        raise NoCrossingError(
            f"it changes the kinematics: the square of the dependent leg was {before}, it becomes {after}"
        )
    images = _solved(gram, new, ring)
    substitution = dict(zip(ring.names, images, strict=True))
    for e in range(size):
        for f in range(e, size):
            if gram[e][f].substitute(substitution) != new[e][f]:
                raise NoCrossingError(
                    f"it changes the kinematics: no values of the invariants give the product {new[e][f]} "
                    f"of external momenta {e + 1} and {f + 1}, which was {gram[e][f]}"
                )
    return images


def _solved(gram: Gram, new: Sequence[Sequence[Rational]], ring: Ring) -> tuple[Rational, ...]:
    """Images from the products that are affine in the invariants; the others are left to the check."""
    count = len(ring.names)
    rows: list[tuple[list[Fraction], Rational]] = []
    for e in range(len(gram)):
        for f in range(e, len(gram)):
            value = gram[e][f]
            slopes = [value.derivative(name) for name in ring.names]
            if not all(slope.is_constant() for slope in slopes):
                if new[e][f] == value:  # nothing says that its invariants change
                    for i, name in enumerate(ring.names):
                        if slopes[i]:
                            unit = [Fraction(int(i == j)) for j in range(count)]
                            rows.append((unit, ring.variable(name)))
                continue
            flat = value
            for name, slope in zip(ring.names, slopes, strict=True):
                flat = flat - slope * ring.variable(name)
            rows.append(([slope.to_fraction() for slope in slopes], new[e][f] - flat))
    images = [ring.variable(name) for name in ring.names]
    solved: list[tuple[int, list[Fraction], Rational]] = []
    for given, right in rows:
        coefficients = given
        for pivot, row, value in solved:
            factor = coefficients[pivot]
            if factor:
                coefficients = [x - factor * y for x, y in zip(coefficients, row, strict=True)]
                right = right - value * factor
        at = next((i for i, x in enumerate(coefficients) if x), None)
        if at is None:
            continue  # a contradiction shows when all products are compared
        lead = coefficients[at]
        fresh = [x / lead for x in coefficients]
        goal = right / lead
        for number, (pivot, row, value) in enumerate(solved):
            factor = row[at]
            if factor:
                lowered = [x - factor * y for x, y in zip(row, fresh, strict=True)]
                solved[number] = (pivot, lowered, value - goal * factor)
        solved.append((at, fresh, goal))
    pivots = {pivot for pivot, _, _ in solved}
    for pivot, row, value in solved:
        for i, x in enumerate(row):
            if x and i not in pivots:
                value = value - ring.variable(ring.names[i]) * x
        images[pivot] = value
    return tuple(images)


def _product(gram: Gram, a: Sequence[Fraction], b: Sequence[Fraction], ring: Ring) -> Rational:
    total = ring.zero
    for e, x in enumerate(a):
        for f, y in enumerate(b):
            if x and y:
                total = total + gram[e][f] * (x * y)
    return total


def read_crossings(source: Source, external: Sequence[str], gram: Gram, ring: Ring) -> tuple[Crossing, ...]:
    """The [crossings] section of a family file.

    Raises
    ------
    FamilyFileError
        For an unknown momentum, and for a substitution that cannot be undone or changes the kinematics.
    """
    if "crossings" not in source.data:
        return ()
    given = source.data["crossings"]
    if not isinstance(given, dict):
        raise source.error("[crossings] must be a table", ("crossings",))
    return tuple(_read(source, name, external, gram, ring) for name in given)


def _read(source: Source, name: str, external: Sequence[str], gram: Gram, ring: Ring) -> Crossing:
    path = ("crossings", name)
    if not _NAME.match(name):
        raise source.error(f"{name!r} is no name: use a letter, then letters, digits and underscores", path)
    table = source.data["crossings"][name]
    if not isinstance(table, dict) or not table:
        raise source.error('a crossing says what momenta become: u = { p1 = "p2", p2 = "p1" }', path)
    momenta = Momenta(tuple(external), ring)
    rows = [[Fraction(int(e == f)) for f in range(len(external))] for e in range(len(external))]
    for momentum in table:
        if momentum not in external:
            raise source.error(
                f"{momentum!r} is no independent external momentum; {nearest(momentum, external)}", path
            )
        text = source.string((*path, momentum))
        assert text is not None, "the key is there"
        rows[external.index(momentum)] = _vector(source, (*path, momentum), text, momenta)
    matrix = tuple(tuple(row) for row in rows)
    try:
        return Crossing(name, matrix, induced_substitution(matrix, gram, ring))
    except NoCrossingError as error:
        raise source.error(f"the crossing {name} is none: {error}", path) from None


def _vector(source: Source, path: tuple[str, ...], text: str, momenta: Momenta) -> list[Fraction]:
    try:
        form = parse_form(text, momenta)
    except ExpressionError as error:
        raise source.expression_error(error, path, text) from None
    constant = all(value.is_constant() for value in form.terms.values())
    if not form.is_vector() or not constant:
        raise source.error("a momentum becomes a combination of external momenta with numbers", path)
    return [form.coefficient(p).to_fraction() for p in momenta.names]
