"""The algebra of momenta: numbers, vectors and scalar products, as family files write them.

A `Form` is a polynomial of degree at most two in the momenta with coefficients in the kinematic field.
``*`` between two vectors is their scalar product and ``^2`` the square, so that ``(k+p)^2 - m2`` and
``2*k*p`` mean what they say, while ``k + m2`` or ``p1*p2*p3`` mean nothing and are refused.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

from ibpred.errors import ExpressionError
from ibpred.exact.grammar import MeaninglessError, parse
from ibpred.exact.rational import Rational, Ring

_HIGHEST_POWER = 20

Term = tuple[str, ...]
"""Names of the momenta in a term, in the order of `Momenta.names`: none, one or two."""


@dataclass(frozen=True)
class Momenta:
    """The vectors that may occur in an expression, and the field of its coefficients."""

    names: tuple[str, ...]
    ring: Ring


@dataclass(frozen=True)
class Form:
    """A scalar (terms with no or two momenta) or a vector (terms with one momentum)."""

    momenta: Momenta
    terms: Mapping[Term, Rational]

    def is_vector(self) -> bool:
        """Whether the value is a vector; zero counts as a scalar."""
        return any(len(term) == 1 for term in self.terms)

    def is_number(self) -> bool:
        """Whether no momentum occurs."""
        return all(len(term) == 0 for term in self.terms)

    def coefficient(self, *term: str) -> Rational:
        """Coefficient of a term; ``coefficient("k", "p")`` is that of k.p, not half of it."""
        return self.terms.get(self._ordered(term), self.momenta.ring.zero)

    def _ordered(self, term: Term) -> Term:
        return tuple(sorted(term, key=self.momenta.names.index))

    def _of(self, terms: Mapping[Term, Rational]) -> Form:
        return Form(self.momenta, {term: value for term, value in terms.items() if value})

    def __neg__(self) -> Form:
        return self._of({term: -value for term, value in self.terms.items()})

    def __add__(self, other: Form) -> Form:
        if self.terms and other.terms and self.is_vector() != other.is_vector():
            raise MeaninglessError("a vector and a scalar cannot be added")
        total = dict(self.terms)
        for term, value in other.terms.items():
            total[term] = total[term] + value if term in total else value
        return self._of(total)

    def __sub__(self, other: Form) -> Form:
        return self + (-other)

    def __mul__(self, other: Form) -> Form:
        total: dict[Term, Rational] = {}
        for left, a in self.terms.items():
            for right, b in other.terms.items():
                term = self._ordered(left + right)
                if len(term) > 2:
                    raise MeaninglessError("a product of more than two momenta has no meaning here")
                total[term] = total[term] + a * b if term in total else a * b
        return self._of(total)

    def __truediv__(self, other: Form) -> Form:
        if not other.is_number():
            raise MeaninglessError("a division by momenta has no meaning here")
        divisor = other.coefficient()
        return self._of({term: value / divisor for term, value in self.terms.items()})

    def __pow__(self, exponent: int) -> Form:
        if self.is_number():
            if abs(exponent) > _HIGHEST_POWER:
                raise MeaninglessError(f"powers above {_HIGHEST_POWER} do not occur in a family")
            return self._of({(): self.coefficient() ** exponent})
        if exponent == 1:
            return self
        if exponent == 2:
            return self * self
        raise MeaninglessError("momenta have only the powers 1 and 2")


def number(momenta: Momenta, value: Fraction | int | Rational) -> Form:
    """A form without momenta."""
    coefficient = value if isinstance(value, Rational) else momenta.ring.constant(value)
    return Form(momenta, {(): coefficient} if coefficient else {})


def vector(momenta: Momenta, coefficients: Mapping[str, Fraction | int]) -> Form:
    """A linear combination of momenta with numbers as coefficients."""
    return Form(momenta, {(n,): momenta.ring.constant(c) for n, c in coefficients.items() if c})


def parse_form(text: str, momenta: Momenta) -> Form:
    """Read an expression in momenta and invariants.

    Raises
    ------
    ExpressionError
        For an unknown symbol (naming the nearest known one), or an operation without meaning.
    """

    def name(symbol: str) -> Form:
        if symbol in momenta.names:
            return vector(momenta, {symbol: 1})
        if symbol in momenta.ring.names:
            return number(momenta, momenta.ring.variable(symbol))
        raise KeyError(symbol, *momenta.names, *momenta.ring.names)

    return parse(text, lambda value: number(momenta, value), name)


def parse_scalar(text: str, momenta: Momenta) -> Form:
    """Read an expression that must not be a vector.

    Raises
    ------
    ExpressionError
        As `parse_form`, and for a vector.
    """
    form = parse_form(text, momenta)
    if form.is_vector():
        raise ExpressionError("a scalar is expected here, this is a vector", text, 0)
    return form


def parse_equation(text: str, momenta: Momenta) -> Form:
    """Read ``left = right`` as the scalar ``left - right``.

    Raises
    ------
    ExpressionError
        As `parse_scalar`, and where there is not exactly one ``=``.
    """
    sides = text.split("=")
    if len(sides) != 2:
        raise ExpressionError("an equation has exactly one '='", text, max(text.find("="), 0))
    try:
        left = parse_scalar(sides[0], momenta)
    except ExpressionError as error:
        raise ExpressionError(error.problem, text, error.position) from None
    try:
        right = parse_scalar(sides[1], momenta)
    except ExpressionError as error:
        raise ExpressionError(error.problem, text, error.position + len(sides[0]) + 1) from None
    return left - right


def momentum_text(names: Sequence[str], coefficients: Sequence[Fraction]) -> str:
    """Text of a combination of momenta, e.g. ``k1-k2+p1``."""
    text = ""
    for name, coefficient in zip(names, coefficients, strict=True):
        if coefficient:
            size = abs(coefficient)
            sign = "-" if coefficient < 0 else "+"
            text += sign + (name if size == 1 else f"{size}*{name}")
    return text.removeprefix("+") or "0"
