"""Solutions of an epsilon-form order by order, as exact combinations of words."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

from ibpred.epsform.form import EpsilonForm
from ibpred.errors import BoundaryError, InputError
from ibpred.exact.rational import Rational
from ibpred.iterated.constants import ZERO, Constant
from ibpred.iterated.words import Word

Function = tuple[tuple[Word, Constant], ...]
"""A combination of iterated integrals: (word, coefficient), words by length, then alphabetically."""


@dataclass(frozen=True)
class Solution:
    """Canonical functions ``f_i = sum_k eps^k f_i^(k)`` in iterated integrals.

    Attributes
    ----------
    letters
        The alphabet of the epsilon-form, in its order; words hold indices into it.
    start
        The power of eps of ``orders[0]``.
    orders
        ``orders[k][i]`` is the coefficient of ``eps^(start + k)`` of f_i.
    """

    letters: tuple[Rational, ...]
    start: int
    orders: tuple[tuple[Function, ...], ...]

    def weight_excess(self) -> int:
        """Largest (weight at order k) - k, where k counts from `start`; at most 0 as it should be."""
        excess = 0
        for k, functions in enumerate(self.orders):
            for function in functions:
                for word, constant in function:
                    weights = constant.weights()
                    excess = max([excess, *(len(word) + w - k for w in weights)])
        return excess

    def is_pure(self) -> bool:
        """Whether every f_i has uniform weight k at the k-th order from `start`."""
        return all(
            constant.weights() == {k - len(word)}
            for k, functions in enumerate(self.orders)
            for function in functions
            for word, constant in function
        )


def letter_roots(letters: Sequence[Rational], variable: str) -> tuple[Fraction | None, ...]:
    """The root of each letter that is linear in the variable; None for the others."""
    roots: list[Fraction | None] = []
    for letter in letters:
        slope = letter.derivative(variable)
        if letter.is_polynomial() and slope.is_constant() and slope and letter.variables() == (variable,):
            offset = letter.substitute({variable: 0}).to_fraction()
            roots.append(-offset / slope.to_fraction())
        else:
            roots.append(None)
    return tuple(roots)


def solve_orders(
    form: EpsilonForm, constants: Sequence[Sequence[Constant]], weight: int, start: int = 0
) -> Solution:
    """Solve ``d f = eps sum_l A_l dlog(letter_l) f`` order by order in one ratio.

    ``f^(k) = sum_j sum_w A_w1 ... A_wj c^(k-j) I_w(x)`` over all words w of length j; the base point is
    x -> 0+ with tangent vector 1, where ``f ~ x^(eps A_0) c(eps)``.

    Parameters
    ----------
    form
        The epsilon-form, in one ratio.
    constants
        ``constants[k][i]``: boundary constant of f_i at ``eps^(start + k)``.
    weight
        Orders through ``eps^weight`` are given.
    start
        Lowest order.

    Raises
    ------
    InputError
        If the form has several ratios.
    BoundaryError
        If the constants stop before ``eps^weight``.
    """
    if len(form.variables) != 1:
        raise InputError(f"one ratio expected, not {', '.join(form.variables) or 'none'}")
    if len(constants) < weight - start + 1:
        raise BoundaryError(
            f"boundary constants reach eps^{start + len(constants) - 1}, but eps^{weight} is asked for"
        )
    size = len(form.tags)
    layers: list[Mapping[Word, tuple[Constant, ...]]] = []
    for k in range(weight - start + 1):
        current: dict[Word, tuple[Constant, ...]] = {}
        if any(constants[k]):
            current[()] = tuple(constants[k])
        for word, vector in layers[-1].items() if layers else ():
            for letter, matrix in enumerate(form.matrices):
                image = tuple(_row_times(matrix[i], vector) for i in range(size))
                if any(image):
                    current[letter, *word] = image
        layers.append(current)
    return Solution(form.letters, start, tuple(_functions(layer, size) for layer in layers))


def _row_times(row: Sequence[Fraction], vector: Sequence[Constant]) -> Constant:
    total = ZERO
    for factor, constant in zip(row, vector, strict=True):
        if factor and constant:
            total = total + constant * factor
    return total


def _functions(layer: Mapping[Word, tuple[Constant, ...]], size: int) -> tuple[Function, ...]:
    words = sorted(layer, key=lambda w: (len(w), w))
    return tuple(tuple((w, layer[w][i]) for w in words if layer[w][i]) for i in range(size))


def word_text(word: Word, roots: Sequence[Fraction | None], variable: str) -> str:
    """A word as a multiple polylogarithm ``G(a1,...,an;x)`` with a_i the roots of its letters.

    ``G(0,...,0;x) = log(x)^n/n!`` and ``G(a,w;x) = int_0^x dt/(t-a) G(w;t)`` otherwise.

    Raises
    ------
    InputError
        If a letter is not linear.
    """
    arguments = []
    for letter in word:
        root = roots[letter]
        if root is None:
            raise InputError(f"letter {letter + 1} is not linear in {variable}: no polylogarithm of it")
        arguments.append(str(root))
    return f"G({','.join(arguments)};{variable})" if word else "1"


def function_text(function: Function, roots: Sequence[Fraction | None], variable: str) -> str:
    """A canonical function at one order as text in polylogarithms and constants."""
    text = ""
    for word, constant in function:
        factor, negative = str(constant), False
        if " " in factor:
            factor = f"({factor})"
        elif factor.startswith("-"):
            factor, negative = factor[1:], True
        piece = factor
        if word:
            integral = word_text(word, roots, variable)
            piece = integral if factor == "1" else f"{factor}*{integral}"
        if not text:
            text = f"-{piece}" if negative else piece
        else:
            text += f" {'-' if negative else '+'} {piece}"
    return text or "0"
