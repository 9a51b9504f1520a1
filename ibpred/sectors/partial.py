"""Maps of sectors that see a part of the external momenta only.

The lines of a sector may depend on the external momenta through a few combinations of them, those that
remain when the loop momenta are shifted; call their span V. A linear map of V that keeps all products
need not come from any map of the external momenta as a whole, but integrals whose numerators see no more
than V depend on the products within V alone. So for these a change of the loop momenta together
with such a map of V is a relation.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from fractions import Fraction
from itertools import product
from typing import Any

import flint

from ibpred.exact.rational import Rational
from ibpred.family.definition import FamilyDefinition
from ibpred.sectors.forms import LineForms, Matrix, monomials
from ibpred.sectors.mapping import Image
from ibpred.sectors.momenta import FamilyPair, independent_rows

Rows = list[list[Fraction]]
PartialImages = tuple[Image | None, ...]


def partial_images(
    pair: FamilyPair, source_lines: Sequence[int], target_lines: Sequence[int]
) -> Iterator[tuple[Matrix, PartialImages]]:
    """Changes of momenta on what the lines see, with the images of the lines that see no more.

    Parameters
    ----------
    pair
        The families.
    source_lines, target_lines
        ``source_lines[i]`` is to become ``target_lines[i]``.

    Yields
    ------
    matrix
        (L+E) x (L+E), old momenta in terms of new ones; on external momenta outside V arbitrary.
    images
        For each line of the source family its image, None for a line that sees more than V.
    """
    source, target = pair.source, pair.target
    if len(source.family.loops) != len(target.family.loops):
        return
    if source.family.kinematic_ring is not target.family.kinematic_ring:
        return
    squares = [
        (source.squares[i], target.squares[j]) for i, j in zip(source_lines, target_lines, strict=True)
    ]
    old: Rows = []
    new: Rows = []
    for before, after in squares:
        if before is None or after is None or before[0] != after[0]:
            return
        old.append(list(before[1]))
        new.append(list(after[1]))
    loops = len(source.family.loops)
    chosen = independent_rows([[int(x) for x in row[:loops]] for row in old], loops)
    if len(chosen) < loops:
        return
    base = _matrix([old[i][:loops] for i in chosen]).inv()
    weights = _rows(_matrix([row[:loops] for row in old]) * base)
    for signs in product((1, -1), repeat=loops - 1):
        aim = [
            [sign * x for x in new[i]] for i, sign in zip(chosen, (1, *signs), strict=True)
        ]  # what the chosen lines become
        followed = [_combined(w, aim) for w in weights]
        turned = _same_loops(followed, new, loops)
        if turned is None:
            continue
        seen = _differences(old, weights, chosen, loops)
        moved = [
            [x - y for x, y in zip(t[loops:], f[loops:], strict=True)]
            for t, f in zip(turned, followed, strict=True)
        ]
        basis = _isometry(source.family, target.family, seen, moved)
        if basis is None:
            continue
        rotation = _extended([seen[i] for i in basis], [moved[i] for i in basis], len(source.family.external))
        change = _change(base, aim, [old[i][loops:] for i in chosen], rotation, loops)
        space = _matrix([seen[i] for i in basis]) if basis else None
        yield (
            change,
            tuple(
                _image(source, target, line, change, base, [old[i] for i in chosen], space)
                for line in range(len(source.family.lines))
            ),
        )


def _same_loops(followed: Rows, new: Rows, loops: int) -> Rows | None:
    """The new momenta with the signs that make their loop parts those given; None if there are none."""
    found: Rows = []
    for wanted, row in zip(followed, new, strict=True):
        if row[:loops] == wanted[:loops]:
            found.append(row)
        elif [-x for x in row[:loops]] == wanted[:loops]:
            found.append([-x for x in row])
        else:
            return None
    return found


def _differences(old: Rows, weights: Rows, chosen: Sequence[int], loops: int) -> Rows:
    """What each line sees besides the chosen ones: external momenta that no shift removes."""
    outer = [old[i][loops:] for i in chosen]
    return [
        [x - y for x, y in zip(row[loops:], _combined(w, outer), strict=True)]
        for row, w in zip(old, weights, strict=True)
    ]


def _isometry(
    source: FamilyDefinition, target: FamilyDefinition, seen: Rows, moved: Rows
) -> list[int] | None:
    """A basis among the seen momenta, if taking them to the moved ones is linear and keeps products."""
    rank = _matrix(seen).rank() if seen and seen[0] else 0
    basis: list[int] = []
    for i in range(len(seen)):
        if len(basis) < rank and _matrix([seen[j] for j in (*basis, i)]).rank() == len(basis) + 1:
            basis.append(i)
    both = [[*before, *after] for before, after in zip(seen, moved, strict=True)]
    if rank and _matrix(both).rank() != rank:
        return None
    if not rank and any(any(row) for row in moved):
        return None
    for i in basis:
        for j in basis:
            if _product(source, seen[i], seen[j]) != _product(target, moved[i], moved[j]):
                return None
    return basis


def _extended(basis: Rows, images: Rows, size: int) -> Rows:
    """A matrix that takes the basis to its images and a complement to zero."""
    vectors, goals = list(basis), list(images)
    for e in range(size):
        unit = [Fraction(int(e == f)) for f in range(size)]
        if _matrix([*vectors, unit]).rank() == len(vectors) + 1:
            vectors.append(unit)
            goals.append([Fraction(0)] * size)
    return _rows(_matrix(vectors).inv() * _matrix(goals)) if size else []


def _change(base: Any, aim: Rows, outer: Rows, rotation: Rows, loops: int) -> Matrix:
    """The change of momenta under which the chosen lines become what they are to become."""
    size = len(rotation)
    right = [
        [*a[:loops], *(x - y for x, y in zip(a[loops:], _combined(o, rotation, size), strict=True))]
        for a, o in zip(aim, outer, strict=True)
    ]
    top = _rows(base * _matrix(right))
    bottom = [[*[Fraction(0)] * loops, *row] for row in rotation]
    return tuple(tuple(row) for row in (*top, *bottom))


def _image(
    source: LineForms,
    target: LineForms,
    line: int,
    change: Matrix,
    base: Any,
    chosen: Rows,
    space: Any,
) -> Image | None:
    square = source.squares[line]
    if square is None:
        return None
    factor, q = square
    loops, external = len(source.family.loops), len(source.family.external)
    weight = _rows(_matrix([list(q[:loops])]) * base)[0]
    beyond = [
        x - y for x, y in zip(q[loops:], _combined(weight, [row[loops:] for row in chosen]), strict=True)
    ]
    if any(beyond):
        inside = space is not None and _matrix([*_rows(space), beyond]).rank() == space.rank()
        if not inside:
            return None
    ring = target.family.kinematic_ring
    constant = source.family.lines[line].constant - _product(source.family, q[loops:], q[loops:]) * factor
    moved = _combined(q, [list(row) for row in change], loops + external)
    constant = constant + _product(target.family, moved[loops:], moved[loops:]) * factor
    row = [factor * moved[i] * moved[j] * (1 if i == j else 2) for i, j in monomials(loops, external)]
    parts = []
    for number, entry in enumerate(_rows(_matrix([row]) * target.inverse)[0]):
        if entry:
            constant = constant - target.family.lines[number].constant * entry
            parts.append((number, ring.constant(entry)))
    return constant, tuple(parts)


def _product(family: FamilyDefinition, a: Sequence[Fraction], b: Sequence[Fraction]) -> Rational:
    total = family.kinematic_ring.zero
    for e, x in enumerate(a):
        for f, y in enumerate(b):
            if x and y:
                total = total + family.gram[e][f] * (x * y)
    return total


def _combined(weights: Sequence[Fraction], rows: Rows, width: int | None = None) -> list[Fraction]:
    size = len(rows[0]) if width is None else width
    return [sum((w * row[i] for w, row in zip(weights, rows, strict=True)), Fraction(0)) for i in range(size)]


def _matrix(rows: Sequence[Sequence[Fraction]]) -> Any:
    return flint.fmpq_mat([[flint.fmpq(x.numerator, x.denominator) for x in row] for row in rows])


def _rows(matrix: Any) -> Rows:
    return [[Fraction(int(x.p), int(x.q)) for x in row] for row in matrix.table()]
