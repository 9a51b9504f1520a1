"""Amplitudes as users write them: sums of coefficient times integral, numerators as scalar products.

Between two momenta ``*`` is their scalar product, so ``3*(d-2)*s*(k1*p3)^2*box(1,1,1,1)`` is one term.
A scalar product with a loop momentum is written in the lines of the integral that it multiplies, and
lowers their powers. External products become invariants.
"""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

from ibpred.errors import ExpressionError, InputError
from ibpred.exact.grammar import MeaninglessError, nearest, parse
from ibpred.exact.rational import Rational, Ring
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.identities.products import Products, products_of
from ibpred.identities.quantities import Integral

_HIGHEST_POWER = 40  # of a scalar product
_INTEGRAL_LIKE = re.compile(r"([A-Za-z_][\w.]*(?:-[A-Za-z_][\w.]*)*)\s*\(\s*[-+]?\d+\s*[,)]")


@dataclass(frozen=True)
class _Monomial:
    """What a coefficient multiplies.

    Attributes
    ----------
    vector
        Name of a momentum that is not contracted, or none.
    products
        Scalar products that contain a loop momentum, sorted, with repetition.
    integral
        An integral, or none.
    """

    vector: str | None = None
    products: tuple[tuple[str, str], ...] = ()
    integral: Integral | None = None


_ONE = _Monomial()


class Setting:
    """The families of an amplitude, and the names that occur in it.

    Parameters
    ----------
    families
        Families with the same kinematics; names of loop momenta may differ.
    """

    def __init__(self, families: Sequence[FamilyDefinition]) -> None:
        self.families = tuple(families)
        self.ring: Ring = families[0].full_ring
        self.loops = tuple(dict.fromkeys(name for family in families for name in family.loops))
        self.external = families[0].external
        for name in self.loops:
            if name in self.external:
                raise InputError(f"{name} is a loop momentum of one family and an external one of another")
        self._dictionaries: dict[int, _Dictionary] = {}

    @property
    def momenta(self) -> tuple[str, ...]:
        return (*self.loops, *self.external)

    def external_product(self, a: str, b: str) -> Rational:
        """The product of two external momenta."""
        i, j = self.external.index(a), self.external.index(b)
        return self.families[0].gram[i][j].to_ring(self.ring)

    def dictionary(self, number: int) -> _Dictionary:
        """Scalar products in the lines of a family."""
        if number not in self._dictionaries:
            self._dictionaries[number] = _Dictionary.of(self.families[number], self.ring)
        return self._dictionaries[number]


@dataclass(frozen=True)
class _Dictionary:
    """Scalar products of one family as ``constant + sum coefficients[b] D_b`` over the full ring."""

    family: FamilyDefinition
    products: Products
    constants: tuple[Rational, ...]

    @classmethod
    def of(cls, family: FamilyDefinition, ring: Ring) -> _Dictionary:
        """Solve the lines for the products, the unit kept."""
        products = products_of(family)
        constants = []
        for row in products.inverse:
            total = ring.zero
            for entry, line in zip(row, family.lines, strict=True):
                if entry:
                    total = total - line.constant.to_ring(ring) * entry
            constants.append(total)
        return cls(family, products, tuple(constants))

    def lower(self, terms: Mapping[Powers, Rational], product: tuple[str, str]) -> Mapping[Powers, Rational]:
        """Integrals times one scalar product."""
        place = self._place(*product)
        found: dict[Powers, Rational] = {}

        def add(powers: Powers, value: Rational) -> None:
            if value:
                found[powers] = found[powers] + value if powers in found else value

        for powers, value in terms.items():
            add(powers, value * self.constants[place])
            for b, entry in enumerate(self.products.inverse[place]):
                if entry:
                    lowered = (*powers[:b], powers[b] - 1, *powers[b + 1 :])
                    add(lowered, value * entry)
        return found

    def _place(self, a: str, b: str) -> int:
        loops = self.family.loops
        for name, other in ((a, b), (b, a)):
            if name in loops and other in loops:
                return self.products.loop_loop(loops.index(name), loops.index(other))
            if name in loops and other in self.family.external:
                return self.products.loop_external(loops.index(name), self.family.external.index(other))
        strange = a if a not in (*loops, *self.family.external) else b
        raise MeaninglessError(
            f"{strange} is no momentum of {self.family.name}, whose integral it multiplies; its loop momenta "
            f"are {', '.join(loops)}"
        )


@dataclass(frozen=True)
class _Value:
    """An element of the algebra: coefficients of monomials."""

    setting: Setting
    terms: Mapping[_Monomial, Rational]

    def _of(self, terms: Mapping[_Monomial, Rational]) -> _Value:
        return _Value(self.setting, {monomial: value for monomial, value in terms.items() if value})

    def is_vector(self) -> bool:
        """Whether momenta are left uncontracted; zero counts as a scalar."""
        return any(monomial.vector is not None for monomial in self.terms)

    def number(self) -> Rational | None:
        """The value where neither momenta nor integrals occur."""
        if all(monomial == _ONE for monomial in self.terms):
            return self.terms.get(_ONE, self.setting.ring.zero)
        return None

    def __neg__(self) -> _Value:
        return self._of({monomial: -value for monomial, value in self.terms.items()})

    def __add__(self, other: _Value) -> _Value:
        if self.terms and other.terms and self.is_vector() != other.is_vector():
            raise MeaninglessError("a vector and a scalar cannot be added")
        total = dict(self.terms)
        for monomial, value in other.terms.items():
            total[monomial] = total[monomial] + value if monomial in total else value
        return self._of(total)

    def __sub__(self, other: _Value) -> _Value:
        return self + (-other)

    def __mul__(self, other: _Value) -> _Value:
        total: dict[_Monomial, Rational] = {}
        for left, a in self.terms.items():
            for right, b in other.terms.items():
                monomial, value = self._product(left, right)
                value = value * a * b
                total[monomial] = total[monomial] + value if monomial in total else value
        return self._of(total)

    def _product(self, left: _Monomial, right: _Monomial) -> tuple[_Monomial, Rational]:
        if left.integral is not None and right.integral is not None:
            raise MeaninglessError("a product of two integrals is no term of a sum of integrals")
        integral = right.integral if left.integral is None else left.integral
        products = [*left.products, *right.products]
        one = self.setting.ring.one
        vector = right.vector if left.vector is None else left.vector
        if left.vector is not None and right.vector is not None:
            vector = None
            a, b = sorted((left.vector, right.vector), key=self.setting.momenta.index)
            if a in self.setting.external:
                one = self.setting.external_product(a, b)
            else:
                products.append((a, b))
        return _Monomial(vector, tuple(sorted(products)), integral), one

    def __truediv__(self, other: _Value) -> _Value:
        divisor = other.number()
        if divisor is None:
            raise MeaninglessError("a division by momenta or integrals has no meaning here")
        return self._of({monomial: value / divisor for monomial, value in self.terms.items()})

    def __pow__(self, exponent: int) -> _Value:
        base = self.number()
        if base is not None:
            return self._of({_ONE: base**exponent})
        if exponent < 0 or exponent > _HIGHEST_POWER:
            raise MeaninglessError(f"scalar products have powers from 0 to {_HIGHEST_POWER}")
        if self.is_vector():
            if exponent % 2:
                raise MeaninglessError("a vector has only even powers, products with itself")
            return (self * self) ** (exponent // 2)
        result = self._of({_ONE: self.setting.ring.one})
        for _ in range(exponent):
            result = result * self
        return result


def parse_terms(text: str, setting: Setting) -> Mapping[Integral, Rational]:
    """Read a sum of terms ``coefficient * integral``.

    Parameters
    ----------
    text
        The sum; integrals are written ``NAME(1,1,-1)`` with the name of their family.
    setting
        The families.

    Returns
    -------
    Coefficients, in the full ring, of the integrals.

    Raises
    ------
    ExpressionError
        With the position of what is wrong.
    """
    plain, integrals = _named(text, setting)

    def name(symbol: str) -> _Value:
        one = setting.ring.one
        if symbol in integrals:
            return _Value(setting, {_Monomial(integral=integrals[symbol]): one})
        if symbol in setting.momenta:
            return _Value(setting, {_Monomial(vector=symbol): one})
        if symbol in setting.ring.names:
            return _Value(setting, {_ONE: setting.ring.variable(symbol)})
        raise KeyError(symbol, *setting.ring.names, *setting.momenta)

    def number(value: Fraction) -> _Value:
        return _Value(setting, {_ONE: setting.ring.constant(value)} if value else {})

    try:
        value = parse(plain, number, name)
        return _expanded(value)
    except ExpressionError as error:
        raise ExpressionError(error.problem, text, error.position) from None
    except MeaninglessError as error:
        raise ExpressionError(str(error), text, 0) from None


def _named(text: str, setting: Setting) -> tuple[str, Mapping[str, Integral]]:
    """The text with each integral replaced by a symbol of the same length, so that positions stay."""
    names = {family.name: number for number, family in enumerate(setting.families)}
    longest_first = sorted(names, key=len, reverse=True)
    pattern = re.compile(rf"(?<![\w.])({'|'.join(map(re.escape, longest_first))})\s*\(([-+\d\s,]*)\)")
    found: dict[str, Integral] = {}

    def symbol(match: re.Match[str]) -> str:
        number = names[match.group(1)]
        parts = match.group(2).split(",")
        lines = len(setting.families[number].lines)
        if not all(re.fullmatch(r"\s*[-+]?\d+\s*", part) for part in parts) or len(parts) != lines:
            raise ExpressionError(
                f"{match.group(1)} has {lines} lines: give as many powers, separated by commas",
                text,
                match.start(),
            )
        short = f"_{len(found)}"
        if len(short) > len(match.group(0)):
            raise ExpressionError("too many integrals in one line", text, match.start())
        placeholder = short.ljust(len(match.group(0)), "_")
        found[placeholder] = (number, tuple(int(part) for part in parts))
        return placeholder

    plain = pattern.sub(symbol, text)
    unknown = _INTEGRAL_LIKE.search(plain)
    if unknown is not None:
        raise ExpressionError(
            f"there is no family {unknown.group(1)!r}; {nearest(unknown.group(1), list(names))}",
            text,
            unknown.start(),
        )
    return plain, found


def _expanded(value: _Value) -> Mapping[Integral, Rational]:
    """Scalar products written in lines."""
    if value.is_vector():
        raise MeaninglessError("a sum of integrals is a scalar, this is a vector")
    setting = value.setting
    total: dict[Integral, Rational] = {}
    for monomial, coefficient in value.terms.items():
        if monomial.integral is None:
            raise MeaninglessError("a term without an integral")
        number, powers = monomial.integral
        terms: Mapping[Powers, Rational] = {powers: coefficient}
        for product in monomial.products:
            terms = setting.dictionary(number).lower(terms, product)
        for lowered, part in terms.items():
            key = (number, lowered)
            total[key] = total[key] + part if key in total else part
    return {integral: part for integral, part in total.items() if part}
