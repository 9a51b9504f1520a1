"""Solutions of an epsilon-form order by order, as exact combinations of words, one word for each ratio.

At a corner ``x1 << x2 << ... << xn`` the solution is a product of path-ordered exponentials: the last ratio
moves first, all others still at zero; then the one before it, the later ones held fixed; at last x1. On each
level the letters are the leading terms in the smaller ratios (`ibpred.iterated.alphabet`). Where they are
linear in the moving ratio the words are polylogarithms ``G(a1, ..., am; x_j)`` with a's rational in the
larger ratios (a fibration basis: Brown, arXiv:0804.1660; Anastasiou, Duhr, Dulat, Mistlberger,
arXiv:1302.4379).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import permutations
from typing import Any

from ibpred.epsform.form import EpsilonForm
from ibpred.errors import BoundaryError, InputError
from ibpred.exact.rational import Rational
from ibpred.iterated.alphabet import Letter, RootLetter, alphabet_of, limit
from ibpred.iterated.constants.constants import ZERO, Constant
from ibpred.iterated.words import Word

Product = tuple[Word, ...]
"""One word for each level, of indices into its letters; the function is the product of their integrals."""

Function = tuple[tuple[Product, Constant], ...]
"""A combination of products of iterated integrals, short words first."""


@dataclass(frozen=True)
class Level:
    """The iterated integrals in one ratio, from its value zero.

    Attributes
    ----------
    variable
        The ratio.
    letters
        Polynomials in it, with coefficients in the larger ratios, and letters with roots of such polynomials.
    """

    variable: str
    letters: tuple[Letter, ...]

    def roots(self) -> tuple[Rational | None, ...]:
        """The root of each letter that is linear in the ratio; None for the others."""
        return tuple(
            None if isinstance(letter, RootLetter) else _root(letter, self.variable)
            for letter in self.letters
        )


@dataclass(frozen=True)
class Solution:
    """Canonical functions ``f_i = sum_k eps^k f_i^(k)`` in iterated integrals.

    Attributes
    ----------
    levels
        In the order of the corner, the smallest ratio first; none for a family without ratios.
    start
        The power of eps of ``orders[0]``.
    orders
        ``orders[k][i]`` is the coefficient of ``eps^(start + k)`` of f_i.
    """

    levels: tuple[Level, ...]
    start: int
    orders: tuple[tuple[Function, ...], ...]

    def weight_excess(self) -> int:
        """Largest (weight at order k) - k, where k counts from `start`; at most 0 as it should be."""
        excess = 0
        for k, functions in enumerate(self.orders):
            for function in functions:
                for product, constant in function:
                    excess = max([excess, *(length(product) + w - k for w in constant.weights())])
        return excess

    def is_pure(self) -> bool:
        """Whether every f_i has uniform weight k at the k-th order from `start`."""
        return all(
            constant.weights() == {k - length(product)}
            for k, functions in enumerate(self.orders)
            for function in functions
            for product, constant in function
        )


def length(product: Product) -> int:
    """Weight of a product of words."""
    return sum(len(word) for word in product)


def _root(letter: Rational, variable: str) -> Rational | None:
    slope = letter.derivative(variable)
    if not letter.is_polynomial() or not slope or variable in slope.variables():
        return None
    return -letter.substitute({variable: 0}) / slope


def letter_roots(letters: Sequence[Rational], variable: str) -> tuple[Fraction | None, ...]:
    """The root of each letter that is linear in the variable and depends on it alone; None for the others."""
    roots: list[Fraction | None] = []
    for letter in letters:
        root = _root(letter, variable) if letter.variables() == (variable,) else None
        roots.append(None if root is None else root.to_fraction())
    return tuple(roots)


def fibration(form: EpsilonForm, corner: Sequence[str]) -> tuple[tuple[Level, tuple[Any, ...]], ...]:
    """The levels of a form at a corner, each with one matrix (`flint.fmpq_mat`) for each letter.

    Parameters
    ----------
    form
        The epsilon-form.
    corner
        Its ratios, the smallest first.

    Raises
    ------
    InputError
        If the corner does not name its ratios.
    """
    if sorted(corner) != sorted(form.variables):
        listed = ", ".join(form.variables)
        raise InputError(f"the corner {' << '.join(corner)} does not name the ratios {listed}")
    alphabet = alphabet_of(form, corner)
    found = []
    for number, name in enumerate(corner, start=1):
        letters = alphabet.depending_on(name)
        found.append((Level(name, tuple(letters)), tuple(letters.values())))
        alphabet = limit(alphabet, name, corner[number:])[1]
    return tuple(found)


def linear_corner(form: EpsilonForm) -> tuple[str, ...] | None:
    """A corner at which the letters of all levels are linear in their ratio; None where there is none.

    The reversed order of the form's ratios is tried first, then all others.
    """
    for corner in permutations(reversed(form.variables)):
        if all(root is not None for level, _ in fibration(form, corner) for root in level.roots()):
            return corner
    return None


def solve_orders(
    form: EpsilonForm,
    corner: Sequence[str],
    constants: Sequence[Sequence[Constant]],
    weight: int,
    start: int = 0,
) -> Solution:
    """Solve ``d f = eps sum_l A_l dlog(letter_l) f`` order by order.

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
    return Solution(
        tuple(level for level, _ in levels),
        start,
        tuple(tuple(_function(layer, i) for i in range(size)) for layer in layers),
    )


def constant_solution(constants: Sequence[Sequence[Constant]], start: int) -> Solution:
    """The solution of a family without ratios: its constants."""
    orders = tuple(tuple((((), value),) if value else () for value in vector) for vector in constants)
    return Solution((), start, orders)


def _rows(matrix: Any) -> list[list[tuple[int, Fraction]]]:
    return [
        [
            (c, Fraction(int(matrix[r, c].p), int(matrix[r, c].q)))
            for c in range(matrix.ncols())
            if matrix[r, c] != 0
        ]
        for r in range(matrix.nrows())
    ]


def _row_times(row: Sequence[tuple[int, Fraction]], vector: Sequence[Constant]) -> Constant:
    total = ZERO
    for column, factor in row:
        if vector[column]:
            total = total + vector[column] * factor
    return total


def _function(layer: Mapping[Product, tuple[Constant, ...]], row: int) -> Function:
    keys = sorted((key for key in layer if layer[key][row]), key=lambda k: (length(k), k))
    return tuple((key, layer[key][row]) for key in keys)


def named_letters(levels: Sequence[Level]) -> dict[Letter, str]:
    """Names l1, l2, ... for the letters that are not linear in the ratio of their level."""
    named = (
        letter
        for level in levels
        for letter, root in zip(level.letters, level.roots(), strict=True)
        if root is None
    )
    return {letter: f"l{k}" for k, letter in enumerate(dict.fromkeys(named), start=1)}


def product_text(product: Product, levels: Sequence[Level]) -> str:
    """A product of words, e.g. ``G(0,x+1;y)*I(l1,-1;x)``; 1 for the empty one.

    ``G(a,w;x) = int_0^x dt/(t-a) G(w;t)``, and I is the same with ``dlog l_k(t)`` in the place of
    ``dt/(t-a)`` where a letter is named (see `named_letters`). At zero the integral of ``dt/t`` is
    regularised to ``log x``, so that ``G(0,...,0;x) = log(x)^n/n!``.
    """
    names = named_letters(levels)
    pieces = []
    for word, level in zip(product, levels, strict=True):
        if not word:
            continue
        roots = level.roots()
        arguments = [names.get(level.letters[letter], str(roots[letter])) for letter in word]
        linear = all(roots[letter] is not None for letter in word)
        pieces.append(f"{'G' if linear else 'I'}({','.join(arguments)};{level.variable})")
    return "*".join(pieces) or "1"


def function_text(function: Function, levels: Sequence[Level]) -> str:
    """A canonical function at one order as text in polylogarithms and constants."""
    text = ""
    for product, constant in function:
        factor, negative = str(constant), False
        if " " in factor:
            factor = f"({factor})"
        elif factor.startswith("-"):
            factor, negative = factor[1:], True
        piece = factor
        if length(product):
            integral = product_text(product, levels)
            piece = integral if factor == "1" else f"{factor}*{integral}"
        if not text:
            text = f"-{piece}" if negative else piece
        else:
            text += f" {'-' if negative else '+'} {piece}"
    return text or "0"
