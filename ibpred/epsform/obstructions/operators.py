"""Linear differential operators with polynomial coefficients: exponents, factors, symmetric squares.

An operator is ``c_0 + c_1 D + ... + c_n D^n``, D = d/dx, the c_k polynomials in x without common factor.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import product
from math import prod

import flint

from ibpred.epsform.places import Place, Residue, coefficients, degree, places_of
from ibpred.epsform.residues.decompose import exact_matrix, null_space
from ibpred.exact.rational import Rational, Ring, polynomial_text

_MOST_COMBINATIONS = 4000
_MOST_DEGREE = 60


@dataclass(frozen=True)
class Operator:
    """``sum_k coefficients[k] D^k``.

    Attributes
    ----------
    coefficients
        Polynomials, the last one not zero.
    name
        The variable x.
    """

    coefficients: tuple[Rational, ...]
    name: str

    @property
    def order(self) -> int:
        """The order n."""
        return len(self.coefficients) - 1

    @property
    def ring(self) -> Ring:
        """The ring of the coefficients."""
        return self.coefficients[0].ring

    def monic(self) -> tuple[Rational, ...]:
        """The coefficients divided by the last one."""
        return tuple(c / self.coefficients[-1] for c in self.coefficients)

    def text(self) -> str:
        """Text in x and D."""
        terms = []
        for power in range(self.order, -1, -1):
            if not self.coefficients[power]:
                continue
            factor = self.coefficients[power].factored_text()
            polynomial = self.coefficients[power].numerator
            if len(polynomial) > 1 and factor == polynomial_text(polynomial):
                factor = f"({factor})"
            tail = "" if power == 0 else "D" if power == 1 else f"D^{power}"
            if not tail:
                terms.append(factor)
            else:
                terms.append(tail if factor == "1" else f"{factor}*{tail}")
        return " + ".join(terms).replace("+ -", "- ")

    def degree(self) -> int:
        """Sum of the degrees of the coefficients: how complicated it is."""
        return sum(degree(c.numerator, self.ring, self.name) for c in self.coefficients)


def operator(values: Sequence[Rational], name: str) -> Operator:
    """An operator from rational coefficients: multiplied by what makes them coprime polynomials."""
    ring = values[0].ring
    common = ring.context.constant(1)
    for c in values:
        common = common * (c.denominator / common.gcd(c.denominator))
    scale = ring.fraction(common, ring.context.constant(1))
    scaled = [c * scale for c in values]
    shared = ring.context.constant(0)
    for c in scaled:
        shared = shared.gcd(c.numerator)
    if scaled[-1].numerator.leading_coefficient() < 0:
        shared = -shared
    return Operator(tuple(c / ring.fraction(shared, ring.context.constant(1)) for c in scaled), name)


@dataclass(frozen=True)
class LocalExponents:
    """Exponents at a singular point.

    Attributes
    ----------
    place
        The point; None for infinity (exponents in 1/x).
    regular
        Whether the point is regular (Fuchs).
    exponents
        The rational ones, ascending, with multiplicity; all of them where there are as many as the order.
    """

    place: Place | None
    regular: bool
    exponents: tuple[Fraction, ...]

    def text(self, name: str) -> str:
        """The point for messages."""
        return f"{name} = infinity" if self.place is None else self.place.text()


def singular_points(equation: Operator) -> tuple[LocalExponents, ...]:
    """Local exponents at the zeros of the leading coefficient and at infinity."""
    places = places_of([1 / equation.coefficients[-1]], equation.ring, equation.name)
    return (*(_at_place(equation, place) for place in places), _at_infinity(equation))


def _at_place(equation: Operator, place: Place) -> LocalExponents:
    """In u = q(x) the operator starts like ``sum_k lead_k (q')^k u^(order_k) d^k/du^k``."""
    orders: list[int | None] = []
    leads: list[Residue | None] = []
    slope, power = place.slope(), place.reduce(equation.ring.context.constant(1))
    for c in equation.coefficients:
        if c:
            order, rest = place.order(c.numerator)
            orders.append(order)
            leads.append(place.multiply(place.reduce(rest), power))
        else:
            orders.append(None)
            leads.append(None)
        power = place.multiply(power, slope)
    lowest = min(o - k for k, o in enumerate(orders) if o is not None)
    last = orders[-1]
    top = leads[-1]
    if last is None or top is None or last - equation.order != lowest:
        return LocalExponents(place, False, ())
    weights: list[Fraction] = []
    for k, (power_, lead) in enumerate(zip(orders, leads, strict=True)):
        if power_ is None or lead is None or power_ - k != lowest:
            weights.append(Fraction(0))
            continue
        ratio = place.divide(lead, top)
        if any(ratio[1:]) or not ratio[0].is_constant():
            return LocalExponents(place, True, ())
        weights.append(ratio[0].to_fraction())
    return LocalExponents(place, True, _rational_roots(weights, Fraction(1)))


def _at_infinity(equation: Operator) -> LocalExponents:
    """``x^-t`` is multiplied by ``(-t)(-t-1)...(-t-k+1) x^-k`` under D^k."""
    growth = [
        degree(c.numerator, equation.ring, equation.name) - k if c else None
        for k, c in enumerate(equation.coefficients)
    ]
    highest = max(g for g in growth if g is not None)
    if growth[-1] != highest:
        return LocalExponents(None, False, ())
    weights = []
    for k, c in enumerate(equation.coefficients):
        if growth[k] == highest:
            parts = coefficients(c.numerator, equation.ring, equation.name)
            weights.append(parts[max(parts)].to_fraction())
        else:
            weights.append(Fraction(0))
    return LocalExponents(None, True, _rational_roots(weights, Fraction(-1)))


def _rational_roots(weights: Sequence[Fraction], sign: Fraction) -> tuple[Fraction, ...]:
    """Roots s of ``sum_k weights[k] (z)(z-1)...(z-k+1)``, z = sign s."""
    total = flint.fmpq_poly([0])
    falling = flint.fmpq_poly([1])
    z = flint.fmpq_poly([0, int(sign)])
    for k, weight in enumerate(weights):
        total = total + falling * flint.fmpq(weight.numerator, weight.denominator)
        falling = falling * (z - k)
    found: list[Fraction] = []
    for factor, power in total.factor()[1]:
        if factor.degree() == 1:
            root = -factor[0] / factor[1]
            found += [Fraction(int(root.p), int(root.q))] * int(power)
    return tuple(sorted(found))


def exponential_solution(equation: Operator) -> Rational | None:
    """f'/f of a solution f = prod (x - a)^(exponent) * polynomial, where there is one.

    Only rational exponents at places with rational coefficients are tried: this finds every right factor of
    order one of a Fuchsian operator whose exponents are all rational.
    """
    points = singular_points(equation)
    if not all(point.regular for point in points):
        return None
    finite = [p for p in points if p.place is not None]
    choices = [sorted(set(p.exponents)) for p in finite]
    infinity = next(e for e in points if e.place is None).exponents
    if prod(len(c) for c in choices) > _MOST_COMBINATIONS or not all(choices):
        return None
    for exponents in product(*choices):
        total = sum(
            (e * p.place.degree for e, p in zip(exponents, finite, strict=True) if p.place is not None),
            Fraction(0),
        )
        for top in {-t - total for t in infinity}:
            if top.denominator != 1 or not 0 <= top <= _MOST_DEGREE:
                continue
            log = equation.ring.zero
            for e, p in zip(exponents, finite, strict=True):
                if p.place is not None and e:
                    log = log + p.place.logarithmic() * e
            polynomial = _polynomial_solution(shifted(equation, log), int(top))
            if polynomial is not None:
                return log + polynomial.derivative(equation.name) / polynomial
    return None


def shifted(equation: Operator, log: Rational) -> Operator:
    """The operator of f where ``exp(int log) f`` is a solution: D becomes D + log."""
    power: list[Rational] = [equation.ring.one]
    total = [equation.ring.zero] * (equation.order + 1)
    for c in equation.coefficients:
        for k, entry in enumerate(power):
            total[k] = total[k] + c * entry
        raised = [entry.derivative(equation.name) + log * entry for entry in power] + [equation.ring.zero]
        for k, entry in enumerate(power):
            raised[k + 1] = raised[k + 1] + entry
        power = raised
    return operator(total, equation.name)


def _polynomial_solution(equation: Operator, top: int) -> Rational | None:
    """A polynomial solution of degree at most `top`."""
    ring, x = equation.ring, equation.ring.variable(equation.name)
    images = []
    for n in range(top + 1):
        total, value = ring.zero, x**n
        for c in equation.coefficients:
            total = total + c * value
            value = value.derivative(equation.name)
        images.append(
            {int(e[ring.index(equation.name)]): int(c) for e, c in total.numerator.to_dict().items()}
        )
    keys = sorted({k for image in images for k in image})
    if not keys:
        return ring.one
    rows = [[Fraction(image.get(k, 0)) for image in images] for k in keys]
    vectors = null_space(exact_matrix(rows))
    if not vectors:
        return None
    return sum((x**n * v for n, v in enumerate(vectors[0]) if v), ring.zero)


def right_quotient(equation: Operator, factor: Operator) -> Operator:
    """A with ``A factor = L`` up to a function on the left.

    Raises
    ------
    ArithmeticError
        If the operator has no such right factor.
    """
    rest, name, order = list(equation.coefficients), equation.name, factor.order
    quotient = [equation.ring.zero] * (equation.order - order + 1)
    for k in range(equation.order - order, -1, -1):
        head = rest[k + order] / factor.coefficients[-1]
        quotient[k] = head
        for j, c in enumerate(factor.coefficients):
            for i, entry in enumerate(_times_function(k, c, name)):
                rest[i + j] = rest[i + j] - head * entry
    if any(rest):
        raise ArithmeticError("the operator has no such right factor")
    return operator(quotient, name)


def _times_function(power: int, log: Rational, name: str) -> list[Rational]:
    """Coefficients of the operator ``D^power log``."""
    row = [log]
    for _ in range(power):
        raised = [entry.derivative(name) for entry in row] + [log.ring.zero]
        for k, entry in enumerate(row):
            raised[k + 1] = raised[k + 1] + entry
        row = raised
    return row


def adjoint(equation: Operator) -> Operator:
    """``sum_k (-D)^k c_k``."""
    total = [equation.ring.zero] * (equation.order + 1)
    for k, c in enumerate(equation.coefficients):
        for j, entry in enumerate(_times_function(k, c, equation.name)):
            total[j] = total[j] + entry * (-1) ** k
    return operator(total, equation.name)


def symmetric_root(equation: Operator) -> Operator | None:
    """The operator of order two whose symmetric square one of order three is; None where it is none.

    The symmetric square of ``D^2 + p D + q`` is ``D^3 + 3p D^2 + (2p^2 + p' + 4q) D + (4pq + 2q')``.
    """
    if equation.order != 3:
        return None
    c, b, a, one = equation.monic()
    p = a / 3
    q = (b - p * p * 2 - p.derivative(equation.name)) / 4
    if c != p * q * 4 + q.derivative(equation.name) * 2:
        return None
    return operator([q, p, one], equation.name)


def is_self_adjoint(equation: Operator) -> bool:
    """Whether ``L* a = (-1)^n a L`` for the function a with ``a'/a = 2 c_(n-1)/(n c_n)``, L made monic.

    The condition on operators of Calabi-Yau type (Bogner, arXiv:1304.5434).
    """
    monic = equation.monic()
    log = monic[-2] * Fraction(2, equation.order)
    plain = Operator(monic, equation.name)
    total = [equation.ring.zero] * (equation.order + 1)
    for k, c in enumerate(monic):
        for j, entry in enumerate(_times_function(k, c, equation.name)):
            total[j] = total[j] + entry * (-1) ** k
    moved = shifted(Operator(tuple(total), equation.name), log)
    return moved == operator(plain.coefficients, equation.name)


def maximal_points(equation: Operator) -> tuple[LocalExponents, ...]:
    """Points of maximal unipotent monodromy: all exponents equal (then there are all powers of the log)."""
    return tuple(
        p
        for p in singular_points(equation)
        if p.regular and len(p.exponents) == equation.order and len(set(p.exponents)) == 1
    )
