"""Couplings to or from a block whose functions carry different square roots: exact elimination.

``1 + D`` with D in block (i, j) adds ``A_i D - D A_j - D'`` to the coupling M. In the rational basis a
function with the tag P has the exponent -1/2 at the zeros of P, and the diagonal blocks A are not in
epsilon-form there, so that the residues at a place are matrices over its residue field:

* a pole of order m + 1 > 1 at a place q is removed by ``D = D0 / q^m``, where D0 solves
  ``(m + Res_i) D0 - D0 Res_j = -lead / q'``: the eigenvalues of the left side are m, m + 1/2 or m - 1/2 up to
  multiples of eps;
* where q is under the root of column b but not of row a the entry must be regular, and its simple pole is
  removed likewise by D0 in these entries (m = 0, eigenvalue 1/2);
* at infinity, growth is measured between the functions themselves, so in half-integers: with t the degrees
  of the tags, the entry (a, b) may grow like ``x^(-1 - (t_a - t_b)/2)``, and what exceeds it is removed level
  by level with polynomials, those that vanish where the second rule asks for it.

The coupling between equally rooted blocks is the special case done in `triangular`.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from ibpred.epsform.form import Matrix
from ibpred.epsform.matrices import added, product, solve, subtracted
from ibpred.epsform.places import Place, Residue, degree, growth, leading, places_of
from ibpred.epsform.roots.tags import Tag, only_in, product_of
from ibpred.exact.rational import Rational, Ring

Entry = tuple[int, int]


def reduced_mixed(
    coupling: Matrix, diagonal: tuple[Matrix, Matrix], tags: tuple[Sequence[Tag], Sequence[Tag]], name: str
) -> tuple[Matrix, Matrix]:
    """D for one coupling, and what is left of the coupling.

    Parameters
    ----------
    coupling
        M, in the rational basis.
    diagonal
        The diagonal blocks of its rows and columns.
    tags
        Of its rows and columns.
    name
        The variable.
    """
    ring = diagonal[0][0][0].ring
    state = _State(coupling, diagonal, tags, name, ring)
    for spot in places_of((e for row in coupling for e in row), ring, name):
        state.clear_place(spot)
    state.clear_infinity()
    return state.total, state.coupling


class _State:
    """The coupling while it is reduced, and the change of basis so far."""

    def __init__(
        self,
        coupling: Matrix,
        diagonal: tuple[Matrix, Matrix],
        tags: tuple[Sequence[Tag], Sequence[Tag]],
        name: str,
        ring: Ring,
    ) -> None:
        self.coupling = coupling
        self.left, self.right = diagonal
        self.rows, self.columns = tags
        self.name, self.ring = name, ring
        self.total: Matrix = tuple((ring.zero,) * len(self.columns) for _ in self.rows)
        self.entries = [(a, b) for a in range(len(self.rows)) for b in range(len(self.columns))]

    def apply(self, step: dict[Entry, Rational]) -> None:
        """Add D to the change of basis."""
        d = tuple(
            tuple(step.get((a, b), self.ring.zero) for b in range(len(self.columns)))
            for a in range(len(self.rows))
        )
        change = subtracted(product(self.left, d, self.ring), product(d, self.right, self.ring))
        slope = tuple(tuple(e.derivative(self.name) if e else e for e in row) for row in d)
        self.coupling = added(self.coupling, subtracted(change, slope))
        self.total = added(self.total, d)

    def clear_place(self, spot: Place) -> None:
        """Remove what is not allowed at a finite place."""
        slope = spot.slope()
        residues = [
            [[spot.divide(spot.principal(e, 1), slope) for e in row] for row in matrix]
            for matrix in (self.left, self.right)
        ]
        while (order := self._order(spot, self.entries)) > 1:
            self._clear_pole(spot, order, self.entries, residues)
        strict = [
            (a, b)
            for a, b in self.entries
            if _under(spot, self.columns[b]) and not _under(spot, self.rows[a])
        ]
        if self._order(spot, strict) > 0:
            self._clear_pole(spot, 1, strict, residues)

    def _order(self, spot: Place, entries: Sequence[Entry]) -> int:
        found = (self.coupling[a][b] for a, b in entries)
        return max((spot.order(e.denominator)[0] for e in found if e), default=0)

    def _clear_pole(
        self,
        spot: Place,
        order: int,
        entries: Sequence[Entry],
        residues: Sequence[Sequence[Sequence[Residue]]],
    ) -> None:
        left, right = residues
        slope, power, inside = spot.slope(), order - 1, set(entries)
        matrix: dict[tuple[Entry, Entry], Residue] = {}
        target: dict[Entry, Residue] = {}

        def put(row: Entry, column: Entry, value: Residue) -> None:
            if column in inside and any(value):
                before = matrix.get((row, column))
                total = value if before is None else tuple(x + y for x, y in zip(before, value, strict=True))
                matrix[row, column] = total

        one = (self.ring.constant(power), *(self.ring.zero,) * (spot.degree - 1))
        for a, b in entries:
            lead = spot.divide(spot.principal(self.coupling[a][b], order), slope)
            target[a, b] = tuple(-value for value in lead)
            put((a, b), (a, b), one)
            for k in range(len(self.rows)):
                put((a, b), (k, b), left[a][k])
            for k in range(len(self.columns)):
                put((a, b), (a, k), tuple(-value for value in right[k][b]))
        solution = _solve_over_place(matrix, target, entries, spot)
        below = spot.element**power
        step = {}
        for (a, b), value in solution.items():
            if any(value):
                # D vanishes at the other places where the entry must be regular
                others = [f for f in only_in(self.columns[b], self.rows[a]) if not _under(spot, (f,))]
                weight = product_of(others, self.ring)
                rest = spot.divide(value, spot.reduce(weight.numerator))
                step[a, b] = spot.lift(rest) * weight / below
        self.apply(step)

    def clear_infinity(self) -> None:
        """Remove what grows too much at infinity."""
        heights = {(a, b): self._height(a, b) for a, b in self.entries}
        at_left = self._at_infinity(self.left, self.rows)
        at_right = self._at_infinity(self.right, self.columns)
        while True:
            levels = {
                (a, b): growth(self.coupling[a][b], self.name) + heights[a, b]
                for a, b in self.entries
                if self.coupling[a][b]
            }
            level = max(levels.values(), default=Fraction(-1))
            if level <= -1:
                return
            inside = []
            for a, b in self.entries:
                power = level + 1 - heights[a, b] - self._degree(only_in(self.columns[b], self.rows[a]))
                if power.denominator == 1 and power >= 0:
                    inside.append((a, b))
            if not any(entry in inside for entry, here in levels.items() if here == level):
                return
            self._lower(level, inside, heights, at_left, at_right)

    def _height(self, a: int, b: int) -> Fraction:
        """Half the difference of the degrees of the tags: growth between the functions minus that of M."""
        return Fraction(self._degree(self.rows[a]) - self._degree(self.columns[b]), 2)

    def _degree(self, tag: Tag) -> int:
        return sum(degree(factor.numerator, self.ring, self.name) for factor in tag)

    def _at_infinity(self, matrix: Matrix, tags: Sequence[Tag]) -> list[list[Rational]]:
        """Coefficients of ``x^(-1 - (t_a - t_b)/2)``."""
        found = []
        for a, row in enumerate(matrix):
            line = []
            for b, entry in enumerate(row):
                wanted = -1 - Fraction(self._degree(tags[a]) - self._degree(tags[b]), 2)
                there = bool(entry) and growth(entry, self.name) == wanted
                line.append(leading(entry, self.name) if there else self.ring.zero)
            found.append(line)
        return found

    def _lower(
        self,
        level: Fraction,
        inside: Sequence[Entry],
        heights: dict[Entry, Fraction],
        left: Sequence[Sequence[Rational]],
        right: Sequence[Sequence[Rational]],
    ) -> None:
        place = {entry: k for k, entry in enumerate(inside)}
        size = len(inside)
        matrix = [[self.ring.zero] * size for _ in inside]
        target = []
        for (a, b), k in place.items():
            entry = self.coupling[a][b]
            there = bool(entry) and growth(entry, self.name) + heights[a, b] == level
            target.append((-leading(entry, self.name) if there else self.ring.zero,))
            matrix[k][k] = matrix[k][k] - (level + 1 - heights[a, b])
            for c in range(len(self.rows)):
                if (c, b) in place:
                    matrix[k][place[c, b]] = matrix[k][place[c, b]] + left[a][c]
            for c in range(len(self.columns)):
                if (a, c) in place:
                    matrix[k][place[a, c]] = matrix[k][place[a, c]] - right[c][b]
        solution = solve(tuple(map(tuple, matrix)), tuple(target), self.ring)
        x = self.ring.variable(self.name)
        step = {}
        for (a, b), (value,) in zip(inside, solution, strict=True):
            if value:
                weight = product_of(only_in(self.columns[b], self.rows[a]), self.ring)
                power = level + 1 - heights[a, b] - growth(weight, self.name)
                step[a, b] = value / leading(weight, self.name) * weight * x ** int(power)
        self.apply(step)


def _under(spot: Place, tag: Tag) -> bool:
    return any(spot.polynomial in (factor.numerator, -factor.numerator) for factor in tag)


def _solve_over_place(
    matrix: dict[tuple[Entry, Entry], Residue],
    target: dict[Entry, Residue],
    entries: Sequence[Entry],
    spot: Place,
) -> dict[Entry, Residue]:
    """A linear system over the residue field, in components."""
    ring, n = spot.ring, spot.degree
    place = {entry: k * n for k, entry in enumerate(entries)}
    size = len(entries) * n
    rows = [[ring.zero] * size for _ in range(size)]
    for (row, column), value in matrix.items():
        power = value
        generator = (ring.zero, ring.one, *(ring.zero,) * (n - 2)) if n > 1 else None
        for k in range(n):
            for i in range(n):
                if power[i]:
                    rows[place[row] + i][place[column] + k] = power[i]
            if generator is not None and k + 1 < n:
                power = spot.multiply(power, generator)
    flat = tuple((value,) for entry in entries for value in target[entry])
    found = solve(tuple(map(tuple, rows)), flat, ring)
    return {entry: tuple(found[place[entry] + k][0] for k in range(n)) for entry in entries}
