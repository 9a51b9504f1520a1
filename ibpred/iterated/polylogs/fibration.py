"""Polylogarithms of rational functions in a fibration basis: ``G(..; z_j)`` with letters free of z_1 ... z_j.

The variables are taken in order. In the first one the function is the integral of its derivative, which holds
polylogarithms of lower weight, plus its regularised limit at zero, which depends on the others only
(Brown, arXiv:0804.1660; Anastasiou, Duhr, Dulat, Mistlberger, arXiv:1302.4379). Constants left at the end are
polylogarithms at rational numbers and known exactly where these are zeta values and alternating sums.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

import flint

from ibpred.balls.accuracy import bits_for, until_accurate
from ibpred.balls.context import Ball, precision
from ibpred.errors import InputError, PointError
from ibpred.exact.grammar import parse_rational
from ibpred.exact.rational import Rational, Ring, ring
from ibpred.iterated.constants.constants import ONE, ZERO, Constant, log_of
from ibpred.iterated.polylogs.limits import UnitWord, leading_coefficient, limit_of_word, order_at_zero
from ibpred.iterated.polylogs.polylog_values import Place, polylog_balls
from ibpred.iterated.polylogs.special import exact_word
from ibpred.iterated.words import regularised, shuffle, without_tail

Letters = tuple[Rational, ...]

Key = tuple[Letters, ...]
"""One word for each variable; it stands for the product of their polylogarithms."""

Terms = dict[Key, Constant]

_BITS_PER_DIGIT = 12


@dataclass(frozen=True)
class FibrationBasis:
    """``sum constant prod_j G(letters_j; z_j)``, the letters of z_j free of z_1, ..., z_j.

    Attributes
    ----------
    variables
        z_1, z_2, ..., in the order taken.
    terms
        Words (one for each variable) and their constants, short words first.
    """

    variables: tuple[str, ...]
    terms: tuple[tuple[Key, Constant], ...]

    def __str__(self) -> str:
        pieces = []
        for key, constant in self.terms:
            factors = [
                f"G({','.join(map(str, word))};{name})"
                for word, name in zip(key, self.variables, strict=True)
                if word
            ]
            text = str(constant)
            if not factors:
                pieces.append(text)
                continue
            if len(list(constant.terms())) > 1:
                text = f"({text})"
            shown = "*".join(factors)
            pieces.append({"1": shown, "-1": f"-{shown}"}.get(text, f"{text}*{shown}"))
        return " + ".join(pieces).replace("+ -", "- ") or "0"

    def value(self, point: Mapping[str, Fraction], digits: int, side: int = 0) -> Ball:
        """The value at positive variables.

        Parameters
        ----------
        point
            A value for each variable.
        digits
            Digits wanted.
        side
            Where letters lie on the path of a word: +1 if they count as a + i0, -1 for a - i0.

        Raises
        ------
        PointError
            If a value is missing or not positive, a letter lies on a path and no side is given, or a word is
            infinite.
        PrecisionError
            If the digits are not reached.
        """
        for name in self.variables:
            if point.get(name, Fraction(0)) <= 0:
                raise PointError(f"a positive value of {name} is needed")

        def compute(bits: int) -> tuple[Ball, ...]:
            tables = [self._table(j, point, bits, side) for j in range(len(self.variables))]
            with precision(bits):
                total = flint.acb(0)
                for key, constant in self.terms:
                    term = constant.ball(bits)
                    for table, word in zip(tables, key, strict=True):
                        term = term * table[word]
                    total += term
                return (total,)

        return until_accurate(
            compute, lambda balls: balls, digits, bits_for(digits) + 60, _BITS_PER_DIGIT * digits + 2000
        )[0]

    def _table(self, j: int, point: Mapping[str, Fraction], bits: int, side: int) -> dict[Letters, Ball]:
        """All words in one variable."""
        words = list(dict.fromkeys(key[j] for key, _ in self.terms))
        letters = list(dict.fromkeys(letter for word in words for letter in word))
        end = point[self.variables[j]]
        values = [
            letter.substitute({n: point[n] for n in letter.variables()}).to_fraction() for letter in letters
        ]
        if end in values:
            raise PointError(f"a letter {letters[values.index(end)]} lies at {self.variables[j]} = {end}")
        distinct = list(dict.fromkeys(values))
        places = [Place(v, Fraction(0), side if 0 < v < end else 0) for v in distinct]
        coded = [tuple(distinct.index(values[letters.index(a)]) for a in word) for word in words]
        return dict(zip(words, polylog_balls(coded, places, Place(end), bits), strict=True))


def read_polylog(text: str, variables: Sequence[str]) -> tuple[Letters, Rational]:
    """Arguments and end point of ``G(a1, ..., an; x)``.

    Parameters
    ----------
    text
        Rational functions of the variables as arguments, e.g. ``G(0, 1/(x*y); 1-x)``.
    variables
        Their names.

    Raises
    ------
    InputError
        If the text is not of this form.
    """
    body = text.strip()
    if not (body.startswith("G(") and body.endswith(")") and body.count(";") == 1):
        raise InputError(f"{text!r} is not of the form G(a1, ..., an; x)")
    inside, end = body[2:-1].split(";")
    field = ring(variables)
    pieces = inside.split(",") if inside.strip() else []
    return tuple(parse_rational(piece, field) for piece in pieces), parse_rational(end, field)


def fibration_basis(
    arguments: Sequence[Rational], x: Rational, variables: Sequence[str], side: int = 0
) -> FibrationBasis:
    """``G(a1, ..., an; x)`` with rational functions as arguments, in a fibration basis.

    The result equals the polylogarithm where all variables are positive and small, each against the next one,
    and by analytic continuation from there.

    Parameters
    ----------
    arguments, x
        Elements of one field. x is positive in that region.
    variables
        All variables they depend on, in the order wanted.
    side
        Where arguments lie on the path from 0 to x there: +1 if they count as a + i0, -1 for a - i0.

    Raises
    ------
    InputError
        If a variable is missing, x is not positive, a1 = x (the value is infinite), or the derivative holds a
        polynomial that is not linear in the next variable (names it): another order of variables may help.
    PointError
        If an argument lies on the path and no side is given.
    BoundaryError
        If a constant is not known exactly.
    """
    order = tuple(variables)
    used = {name for value in (*arguments, x) for name in value.variables()}
    if not used <= set(order) or len(set(order)) < len(order):
        raise InputError(f"the variables {', '.join(order)} must name each of {', '.join(sorted(used))} once")
    if arguments and arguments[0] == x:
        raise InputError(f"G with the first argument equal to the end point {x} is infinite")
    if not _is_positive(x, order):
        raise InputError(
            f"the end point {x} is not positive where the variables are small and positive, each against the "
            "next; G depends on ratios: turn the signs of all arguments"
        )
    work = _Conversion(x.ring, order)
    total: Terms = {}
    word = tuple(arguments)
    zeros = len(word) - len(_without_zeros(word))
    logarithm = work.logarithm(x, 0) if zeros else {}
    power = {work.unit: ONE}
    for k in range(zeros + 1):
        if k:
            power = _scaled(_product(power, logarithm), Fraction(1, k))
        # G(u 0^z; x) = sum_k reg(u 0^(z-k)) log(x)^k/k!
        for rest, factor in without_tail(word[: len(word) - k], x.ring.zero).items():
            unit = work.word((tuple(a / x for a in rest), side), 0)
            _accumulate(total, _product(power, unit), ONE * factor)
    ordered = sorted(total.items(), key=lambda item: ([len(w) for w in item[0]], str(item[0])))
    return FibrationBasis(order, tuple(ordered))


def _without_zeros(word: Letters) -> Letters:
    end = len(word)
    while end and not word[end - 1]:
        end -= 1
    return word[:end]


def _is_positive(value: Rational, variables: Sequence[str]) -> bool:
    for name in variables:
        if not value:
            return False
        value = leading_coefficient(value, name, order_at_zero(value, name))
    return value.to_fraction() > 0


class _Conversion:
    """Unit words in terms of the basis; each is converted once."""

    def __init__(self, field: Ring, variables: tuple[str, ...]) -> None:
        self.field = field
        self.variables = variables
        self.unit: Key = ((),) * len(variables)
        self.known: dict[tuple[UnitWord, int], Terms] = {}

    def word(self, unit: UnitWord, level: int) -> Terms:
        """A unit word that is free of the variables before `level`."""
        letters, side = unit
        total: Terms = {}
        for core, factor in regularised(letters, self.field.one, self.field.zero).items():
            if ((core, side), level) not in self.known:
                self.known[(core, side), level] = self._convergent(core, side, level)
            _accumulate(total, self.known[(core, side), level], ONE * factor)
        return total

    def _convergent(self, letters: Letters, side: int, level: int) -> Terms:
        while level < len(self.variables) and not any(
            self.variables[level] in b.variables() for b in letters
        ):
            level += 1
        if level == len(self.variables):
            value = exact_word(tuple(b.to_fraction() for b in letters), side)
            return {self.unit: value} if value else {}
        name = self.variables[level]
        chain = (self.field.one, *letters, self.field.zero)
        derivative: dict[Rational, Terms] = {}
        for i in range(1, len(chain) - 1):
            powers: dict[Rational, int] = {}
            for neighbour, sign in ((chain[i - 1], 1), (chain[i + 1], -1)):
                difference = neighbour - chain[i]
                for factor, power in self._factors(difference, name) if difference else ():
                    powers[factor] = powers.get(factor, 0) + sign * power
            if any(powers.values()):
                shorter = self.word((letters[: i - 1] + letters[i:], side), level)
                for factor, power in powers.items():
                    if power:
                        _accumulate(derivative.setdefault(factor, {}), shorter, ONE * power)
        total: Terms = {}
        for factor, inner in derivative.items():
            if inner:
                _accumulate(total, _prefixed(inner, _root(factor, name), level), ONE)
        for words, coefficient in limit_of_word(letters, side, name).items():
            product = {self.unit: ONE * coefficient}
            for unit in words:
                product = _product(product, self.word(unit, level + 1))
            _accumulate(total, product, ONE)
        return total

    def logarithm(self, value: Rational, level: int) -> Terms:
        """``log value`` of a function that is positive in the region."""
        total: Terms = {}
        for at in range(level, len(self.variables)):
            name = self.variables[at]
            for factor, power in self._factors(value, name):
                _accumulate(total, _prefixed({self.unit: ONE}, _root(factor, name), at), ONE * power)
            value = leading_coefficient(value, name, order_at_zero(value, name))
        try:
            constant = log_of(value.to_fraction())
        except KeyError as error:
            raise InputError(f"{error.args[0]} is needed, which is not among the exact constants") from None
        _accumulate(total, {self.unit: constant}, ONE)
        return total

    def _factors(self, value: Rational, name: str) -> list[tuple[Rational, int]]:
        """The factors that depend on a variable, with multiplicities."""
        return [
            (self.field.fraction(polynomial, self.field.context.constant(1)), power)
            for polynomial, power in value.factors()[1]
            if polynomial.degrees()[self.field.index(name)]
        ]


def _root(factor: Rational, name: str) -> Rational:
    slope = factor.derivative(name)
    if name in slope.variables():
        raise InputError(f"the letter {factor} is not linear in {name}: try another order of the variables")
    return -factor.substitute({name: 0}) / slope


def _prefixed(terms: Terms, letter: Rational, level: int) -> Terms:
    return {(*key[:level], (letter, *key[level]), *key[level + 1 :]): v for key, v in terms.items()}


def _scaled(terms: Terms, factor: Fraction) -> Terms:
    return {key: value * factor for key, value in terms.items()}


def _accumulate(target: Terms, source: Terms, factor: Constant) -> None:
    for key, value in source.items():
        total = target.get(key, ZERO) + value * factor
        if total:
            target[key] = total
        else:
            target.pop(key, None)


def _product(left: Terms, right: Terms) -> Terms:
    """Product of two functions: the words of each variable are shuffled."""
    total: Terms = {}
    for a, x in left.items():
        for b, y in right.items():
            keys: dict[Key, int] = {(): 1}
            for u, v in zip(a, b, strict=True):
                keys = {
                    (*key, word): count * more
                    for key, count in keys.items()
                    for word, more in shuffle(u, v).items()
                }
            for key, count in keys.items():
                _accumulate(total, {key: x * y * count}, ONE)
    return total
