"""Symbols: what remains of a function when all constants are forgotten but rational numbers.

A symbol is a sum of tensors of letters, first entries (innermost integrations, discontinuities) first. It is
taken modulo constant factors of letters, so it depends on dlog of the letters only. References: Goncharov,
Spradlin, Vergu, Volovich, arXiv:1006.5703; Duhr, Gangl, Rhodes, arXiv:1110.0458.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

from ibpred.epsform.form import EpsilonForm
from ibpred.errors import InputError
from ibpred.exact.rational import Rational
from ibpred.iterated.alphabet import Letter, RootLetter, letters_with_roots
from ibpred.iterated.constants.constants import Constant
from ibpred.iterated.solution import Function, Level
from ibpred.iterated.words import shuffle

Entries = tuple[Letter, ...]
Terms = dict[Entries, Fraction]


@dataclass(frozen=True)
class Symbol:
    """``sum c l1 x l2 x ... x ln``, the first entry first.

    Attributes
    ----------
    terms
        Letters (irreducible polynomials, up to constant factors, and letters with roots) -> rational
        coefficient, without zeros.
    """

    terms: Mapping[Entries, Fraction]

    def __add__(self, other: Symbol) -> Symbol:
        total = dict(self.terms)
        for entries, value in other.terms.items():
            _add(total, entries, value)
        return Symbol(total)

    def scaled(self, factor: Fraction | int) -> Symbol:
        """The symbol times a rational number."""
        return Symbol({entries: value * factor for entries, value in self.terms.items()} if factor else {})

    def product(self, other: Symbol) -> Symbol:
        """Symbol of the product of the functions: the shuffle product."""
        total: Terms = {}
        for left, a in self.terms.items():
            for right, b in other.terms.items():
                for entries, count in shuffle(left, right).items():
                    _add(total, entries, a * b * count)
        return Symbol(total)

    def letters(self) -> tuple[Letter, ...]:
        """All letters that occur, in a fixed order."""
        return tuple(sorted({letter for entries in self.terms for letter in entries}, key=_size))

    def first_entries(self) -> tuple[Letter, ...]:
        """Letters at whose zeros the function has discontinuities on its first sheet."""
        return tuple(sorted({entries[0] for entries in self.terms if entries}, key=_size))


def _size(letter: Letter) -> tuple[int, str]:
    text = str(letter)
    return len(text), text


def _add(total: Terms, entries: Entries, value: Fraction) -> None:
    new = total.get(entries, Fraction(0)) + value
    if new:
        total[entries] = new
    else:
        total.pop(entries, None)


def letters_of(value: Rational) -> dict[Rational, int]:
    """``value = constant * prod letter^power``: the irreducible polynomials, leading coefficient positive."""
    found: dict[Rational, int] = {}
    for polynomial, power in value.factors()[1]:
        letter = value.ring.fraction(polynomial, value.ring.context.constant(1))
        if not letter.is_constant():
            if letter.numerator.coeffs()[0] < 0:
                letter = -letter
            found[letter] = found.get(letter, 0) + power
    return found


def symbol_of_polylog(arguments: Sequence[Rational], x: Rational) -> Symbol:
    """Symbol of ``G(a1, ..., an; x)`` with all arguments variable.

    From the total differential (Goncharov, math/0103059), with a0 = x and a(n+1) = 0,

    ``d G(a1..an; x) = sum_i G(.. without ai ..; x) [dlog(a(i-1) - ai) - dlog(a(i+1) - ai)]``,

    differences that vanish left out.
    """
    return Symbol(_polylog_terms(tuple(arguments), x, {}))


def _polylog_terms(
    arguments: tuple[Rational, ...], x: Rational, known: dict[tuple[Rational, ...], Terms]
) -> Terms:
    if not arguments:
        return {(): Fraction(1)}
    if arguments in known:
        return known[arguments]
    chain = (x, *arguments, x.ring.zero)
    total: Terms = {}
    for i in range(1, len(chain) - 1):
        factors: dict[Rational, int] = {}
        for neighbour, sign in ((chain[i - 1], 1), (chain[i + 1], -1)):
            difference = neighbour - chain[i]
            if difference:
                for letter, power in letters_of(difference).items():
                    factors[letter] = factors.get(letter, 0) + sign * power
        if any(factors.values()):
            shorter = _polylog_terms(arguments[: i - 1] + arguments[i:], x, known)
            for letter, power in factors.items():
                for entries, value in shorter.items():
                    if power:
                        _add(total, (*entries, letter), value * power)
    known[arguments] = total
    return total


def symbol_of_function(function: Function, levels: Sequence[Level]) -> Symbol:
    """Symbol of a combination of products of polylogarithms; terms with transcendental constants drop out.

    Raises
    ------
    InputError
        If a letter is not linear in the ratio of its level.
    """
    total = Symbol({})
    for key, constant in function:
        factor = _rational_part(constant)
        if not factor:
            continue
        term = Symbol({(): factor})
        for word, level in zip(key, levels, strict=True):
            if word:
                roots = level.roots()
                arguments = [root for a in word if (root := roots[a]) is not None]
                if len(arguments) < len(word):
                    raise InputError(f"a letter is not linear in {level.variable}: no polylogarithms of it")
                end = arguments[0].ring.variable(level.variable)
                term = term.product(symbol_of_polylog(arguments, end))
        total = total + term
    return total


def symbols_of_form(form: EpsilonForm, leading: Sequence[Fraction], length: int) -> tuple[Symbol, ...]:
    """Symbols of the canonical functions at one order, from the alphabet alone.

    Parameters
    ----------
    form
        The epsilon-form, in any number of ratios.
    leading
        The rational constants with which the functions begin.
    length
        The order counted from there: the number of entries.
    """
    alphabet: list[tuple[tuple[Letter, int], ...]] = [tuple(letters_of(u).items()) for u in form.letters]
    alphabet += [((letter, 1),) for letter in letters_with_roots(form)]
    matrices = (*form.matrices, *form.odd_matrices)
    size = range(len(form.inverse))
    layer: list[Terms] = [{(): value} if value else {} for value in leading]
    for _ in range(length):
        grown: list[Terms] = [{} for _ in size]
        for matrix, factors in zip(matrices, alphabet, strict=True):
            for i in size:
                for j in size:
                    if matrix[i][j]:
                        for entries, value in layer[j].items():
                            for letter, power in factors:
                                _add(grown[i], (*entries, letter), value * matrix[i][j] * power)
        layer = grown
    return tuple(Symbol(terms) for terms in layer)


def is_integrable(symbol: Symbol, variables: Sequence[str]) -> bool:
    """Whether a symbol is that of a function: for all neighbouring entries ``sum c dlog l ^ dlog l' = 0``.

    Parameters
    ----------
    symbol
        The symbol.
    variables
        The ratios on which its letters depend.
    """
    forms: dict[tuple[Letter, Letter], tuple[str, tuple[Rational, ...]]] = {}
    sums: dict[tuple[int, Entries, Entries, str], list[Rational]] = {}
    for entries, value in symbol.terms.items():
        for i in range(len(entries) - 1):
            pair = entries[i], entries[i + 1]
            if pair not in forms:
                forms[pair] = _wedge(*pair, variables)
            root, components = forms[pair]
            key = i, entries[:i], entries[i + 2 :], root
            terms = [component * value for component in components]
            held = sums.get(key)
            sums[key] = terms if held is None else [a + b for a, b in zip(held, terms, strict=True)]
    return not any(component for total in sums.values() for component in total)


def _wedge(left: Letter, right: Letter, variables: Sequence[str]) -> tuple[str, tuple[Rational, ...]]:
    """Components of ``dlog left ^ dlog right``, a root in front of them left out, and that root's square."""
    a, first = _logarithmic(left, variables)
    b, second = _logarithmic(right, variables)
    one = first.ring.context.constant(1)
    # the root of a product: what both hold comes out of it
    common = first.ring.fraction(first.numerator.gcd(second.numerator), one)
    components = tuple(
        (a[i] * b[j] - a[j] * b[i]) * common
        for i in range(len(variables))
        for j in range(i + 1, len(variables))
    )
    return str(first * second / common**2), components


def _logarithmic(letter: Letter, variables: Sequence[str]) -> tuple[list[Rational], Rational]:
    """dlog without its root, and the root's square."""
    if isinstance(letter, RootLetter):
        return [letter.kernel(name) for name in variables], letter.square
    return [letter.derivative(name) / letter for name in variables], letter.ring.one


def _rational_part(constant: Constant) -> Fraction:
    part = constant.part(0)
    return part.real().to_fraction()
