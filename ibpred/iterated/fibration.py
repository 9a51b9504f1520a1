"""Solutions in several ratios as products of multiple polylogarithms, one ratio after the other.

At a corner ``x1 << x2 << ... << xn`` the solution is a product of path-ordered exponentials: the last ratio
moves first, all others still at zero; then the one before it, the later ones held fixed; at last x1. On
each level the letters are the leading terms in the smaller ratios, and where they are linear in the moving
ratio the words are polylogarithms ``G(a1, ..., am; x_j)`` with a's rational in the larger ratios (a
fibration basis: Brown, arXiv:0804.1660; Anastasiou, Duhr, Dulat, Mistlberger, arXiv:1302.4379).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import permutations
from typing import Any

import flint

from ibpred.balls.accuracy import bits_for, until_accurate
from ibpred.balls.context import Ball, precision
from ibpred.epsform.form import EpsilonForm
from ibpred.errors import BoundaryError, InputError, PointError
from ibpred.exact.rational import Rational
from ibpred.iterated.constants import ZERO, Constant
from ibpred.iterated.matrices import rational_matrix
from ibpred.iterated.polylog_values import Place, polylog_balls
from ibpred.iterated.words import Word

Product = tuple[Word, ...]
"""One word for each level; indices into the roots of the level."""

FibredFunction = tuple[tuple[Product, Constant], ...]
"""A combination of products of polylogarithms."""

_BITS_PER_DIGIT = 12


@dataclass(frozen=True)
class Level:
    """The polylogarithms in one ratio.

    Attributes
    ----------
    variable
        The ratio.
    roots
        The letters ``variable - root``, roots in the larger ratios.
    """

    variable: str
    roots: tuple[Rational, ...]


@dataclass(frozen=True)
class FibredSolution:
    """Canonical functions ``f_i = sum_k eps^k f_i^(k)`` in products of polylogarithms.

    Attributes
    ----------
    levels
        In the order of the corner, the smallest ratio first.
    start
        The power of eps of ``orders[0]``.
    orders
        ``orders[k][i]`` is the coefficient of ``eps^(start + k)`` of f_i.
    """

    levels: tuple[Level, ...]
    start: int
    orders: tuple[tuple[FibredFunction, ...], ...]


def linear_order(form: EpsilonForm) -> tuple[str, ...] | None:
    """An order of the ratios, smallest first, in which all levels have letters linear in their ratio.

    The reversed order of the form's ratios is tried first, then all others; None where there is none.
    """
    for order in permutations(reversed(form.variables)):
        try:
            fibration(form, order)
        except InputError:
            continue
        return order
    return None


def fibration(form: EpsilonForm, corner: Sequence[str]) -> tuple[tuple[Level, tuple[Any, ...]], ...]:
    """The levels of a form at a corner, each with one matrix (`flint.fmpq_mat`) for each root.

    Raises
    ------
    InputError
        If the form has square roots, the corner does not name its ratios, or a letter is not linear in the
        ratio of its level.
    """
    if any(form.tags):
        raise InputError("a form with square roots has no polylogarithms in its ratios: change variables")
    if sorted(corner) != sorted(form.variables):
        listed = ", ".join(form.variables)
        raise InputError(f"the order {', '.join(corner)} does not name the ratios {listed}")
    letters = list(form.letters)
    found = []
    for name in corner:
        by_root: dict[Rational, Any] = {}
        for letter, rows in zip(letters, form.matrices, strict=True):
            matrix = rational_matrix(rows)
            for polynomial, multiplicity in letter.factors()[1]:
                factor = form.ring.fraction(polynomial, form.ring.context.constant(1))
                if name not in factor.variables():
                    continue
                slope = factor.derivative(name)
                if name in slope.variables():
                    raise InputError(f"the letter {factor} is not linear in {name}")
                root = -factor.substitute({name: 0}) / slope
                more = matrix * multiplicity
                by_root[root] = by_root[root] + more if root in by_root else more
        by_root = {root: matrix for root, matrix in by_root.items() if matrix}
        roots = tuple(sorted(by_root, key=lambda r: (bool(r), len(str(r)), str(r))))
        found.append((Level(name, roots), tuple(by_root[r] for r in roots)))
        letters = [_lowest(letter, name) for letter in letters]
    return tuple(found)


def _lowest(letter: Rational, name: str) -> Rational:
    """Leading coefficient of a polynomial at ``name -> 0``."""
    place = letter.ring.index(name)
    least = min(int(e[place]) for e in letter.numerator.monoms())
    return (letter / letter.ring.variable(name) ** least).substitute({name: 0})


def solve_fibration(
    form: EpsilonForm,
    corner: Sequence[str],
    constants: Sequence[Sequence[Constant]],
    weight: int,
    start: int = 0,
) -> FibredSolution:
    """Solve ``d f = eps sum_l A_l dlog(letter_l) f`` order by order in several ratios.

    Parameters
    ----------
    form
        The epsilon-form.
    corner
        Its ratios, the smallest first; there ``f ~ prod_i x_i^(eps A_i) c(eps)``.
    constants
        ``constants[k][i]``: boundary constant of f_i at ``eps^(start + k)``.
    weight
        Orders through ``eps^weight`` are given.
    start
        Lowest order.

    Raises
    ------
    InputError
        As `fibration`.
    BoundaryError
        If the constants stop before ``eps^weight``.
    """
    count = weight - start + 1
    if len(constants) < count:
        raise BoundaryError(
            f"boundary constants reach eps^{start + len(constants) - 1}, but eps^{weight} is asked for"
        )
    levels = fibration(form, corner)
    blank: Product = ((),) * len(levels)
    layers: list[dict[Product, tuple[Constant, ...]]] = [
        {blank: tuple(constants[k])} if any(constants[k]) else {} for k in range(count)
    ]
    for depth in range(len(levels) - 1, -1, -1):
        matrices = [_rows(matrix) for matrix in levels[depth][1]]
        for k in range(1, count):
            # words at this level grow by one letter from one order to the next
            for key, vector in layers[k - 1].items():
                for letter, rows in enumerate(matrices):
                    image = tuple(_row_times(row, vector) for row in rows)
                    if any(image):
                        grown = (*key[:depth], (letter, *key[depth]), *key[depth + 1 :])
                        layers[k][grown] = image
    size = len(form.inverse)
    return FibredSolution(
        tuple(level for level, _ in levels),
        start,
        tuple(tuple(_function(layer, i) for i in range(size)) for layer in layers),
    )


def _rows(matrix: Any) -> list[list[tuple[int, Fraction]]]:
    size = matrix.ncols()
    return [
        [(c, Fraction(int(matrix[r, c].p), int(matrix[r, c].q))) for c in range(size) if matrix[r, c] != 0]
        for r in range(matrix.nrows())
    ]


def _row_times(row: Sequence[tuple[int, Fraction]], vector: Sequence[Constant]) -> Constant:
    total = ZERO
    for column, factor in row:
        if vector[column]:
            total = total + vector[column] * factor
    return total


def _function(layer: Mapping[Product, tuple[Constant, ...]], row: int) -> FibredFunction:
    keys = sorted((key for key in layer if layer[key][row]), key=lambda k: ([len(w) for w in k], k))
    return tuple((key, layer[key][row]) for key in keys)


def fibred_values(
    solution: FibredSolution, point: Mapping[str, Fraction], digits: int
) -> tuple[tuple[Ball, ...], ...]:
    """Values of the canonical functions at positive ratios: ``values[k][i]`` at ``eps^(start + k)``.

    Letters that the path of a ratio meets are passed on one side, all on the same; inside the Euclidean
    region the functions are regular there, so the side does not matter for them (it does for single
    polylogarithms).

    Parameters
    ----------
    solution
        The solution.
    point
        A positive value for each ratio.
    digits
        Digits wanted of each value.

    Raises
    ------
    PointError
        If a ratio is missing or not positive, or a letter vanishes at the point.
    PrecisionError
        If the digits cannot be reached.
    """
    for level in solution.levels:
        if point.get(level.variable, Fraction(0)) <= 0:
            raise PointError(f"a positive value of {level.variable} is needed")
    places = [_places(level, point) for level in solution.levels]
    words: list[list[Word]] = [
        sorted(
            {key[d] for order in solution.orders for f in order for key, _ in f}, key=lambda w: (len(w), w)
        )
        for d in range(len(solution.levels))
    ]

    def compute(bits: int) -> tuple[tuple[Ball, ...], ...]:
        tables = []
        for level, chosen, letters in zip(solution.levels, words, places, strict=True):
            end = Place(point[level.variable])
            tables.append(dict(zip(chosen, polylog_balls(chosen, letters, end, bits), strict=True)))
        cache: dict[Constant, Ball] = {}
        with precision(bits):
            found = []
            for order in solution.orders:
                row = []
                for function in order:
                    total = flint.acb(0)
                    for key, constant in function:
                        if constant not in cache:
                            cache[constant] = constant.ball(bits)
                        term = cache[constant]
                        for table, word in zip(tables, key, strict=True):
                            term = term * table[word]
                        total += term
                    row.append(total)
                found.append(tuple(row))
            return tuple(found)

    return until_accurate(
        compute,
        lambda rows: [value for row in rows for value in row],
        digits,
        bits_for(digits) + 60,
        _BITS_PER_DIGIT * digits + 2000,
    )


def _places(level: Level, point: Mapping[str, Fraction]) -> tuple[Place, ...]:
    here = dict(point)
    found = []
    for root in level.roots:
        value = root.substitute({n: here[n] for n in root.variables()}).to_fraction()
        if value == here[level.variable]:
            raise PointError(f"the letter {level.variable} - ({root}) vanishes at the point")
        found.append(Place(value, Fraction(0), 1 if 0 < value < here[level.variable] else 0))
    if len({(p.real, p.imaginary) for p in found}) < len(found):
        raise PointError(f"two letters in {level.variable} coincide at the point")
    return tuple(found)


def product_text(product: Product, levels: Sequence[Level]) -> str:
    """A product as text: ``G(0, x + 1; y)*G(-1; x)``; 1 for the empty one."""
    pieces = []
    for word, level in zip(product, levels, strict=True):
        if word:
            pieces.append(f"G({', '.join(str(level.roots[a]) for a in word)}; {level.variable})")
    return "*".join(pieces) or "1"
