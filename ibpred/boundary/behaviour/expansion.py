"""Closed forms on a line of kinematics: exact prefactor, powers of letters, and their eps-expansion.

``log Gamma(1 + z) = -gamma_E z + sum_{k >= 2} zeta(k) (-z)^k / k`` and
``log Gamma(1/2 + z) = log sqrt(pi) - (gamma_E + 2 log 2) z + sum_{k >= 2} (2^k - 1) zeta(k) (-z)^k / k``.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from fractions import Fraction
from math import isqrt

from ibpred.boundary.behaviour.gamma import EpsLinear, GammaForm
from ibpred.errors import BoundaryError
from ibpred.exact.rational import Rational, Ring
from ibpred.iterated.alphabet import is_positive_at
from ibpred.iterated.constants.constants import ZERO, Constant, log_of, zeta
from ibpred.iterated.constants.series import Series, eps_valuation, exponential, laurent


@dataclass(frozen=True)
class ClosedForm:
    """``e^(L eps gamma_E) rational prod letter^(slope eps) prod Gammas``, the Gammas near 1 or 1/2.

    Attributes
    ----------
    rational
        In Q(eps, ratio).
    letters
        (polynomial in the ratios, coprime integer coefficients, positive at the corner; slope).
    numbers
        (positive rational number, slope): further factors ``number^(slope eps)``.
    loops
        L.
    near_one, near_half
        Gamma(1 + b eps)^n and Gamma(1/2 + b eps)^n as b -> n.
    half_turns
        h: a further factor ``exp(i pi h eps)``, from scales that are negative in the region.
    """

    rational: Rational
    letters: tuple[tuple[Rational, Fraction], ...]
    numbers: tuple[tuple[Fraction, Fraction], ...]
    loops: int
    near_one: Mapping[Fraction, int]
    near_half: Mapping[Fraction, int]
    half_turns: Fraction = Fraction(0)

    @property
    def heaviness(self) -> int:
        """Weight of what multiplies all orders: each ``Gamma(1/2)`` is half a factor of pi."""
        return max(0, sum(self.near_half.values()) // 2)

    def substituted(self, values: Mapping[str, Rational]) -> ClosedForm:
        """The ratios replaced by other positive functions."""
        letters = tuple((letter.substitute(values), q) for letter, q in self.letters)
        return replace(self, rational=self.rational.substitute(values), letters=letters)

    def transcendental(self, length: int) -> Series:
        """Everything but `rational` and `letters`, through ``eps^(length - 1)``.

        Raises
        ------
        BoundaryError
            If a constant occurs that is not among the exact ones.
        """
        try:
            return self._transcendental(length)
        except KeyError as error:
            raise BoundaryError(
                f"the expansion of a Gamma-function closed form through relative order eps^{length - 1} "
                f"needs {error.args[0]}, which is not among the exact constants"
            ) from None

    def _transcendental(self, length: int) -> Series:
        exponents = [ZERO] * max(length, 1)
        # Euler's constant must drop out for the measure with exp(L eps gamma_E)
        euler = Fraction(self.loops)
        for b, n in (*self.near_one.items(), *self.near_half.items()):
            euler -= n * b
        if euler:
            raise BoundaryError(f"a closed form keeps Euler's constant with coefficient {euler}: it is wrong")
        for k in range(1, len(exponents)):
            total = ZERO
            if k == 1:
                for number, slope in self.numbers:
                    total = total + log_of(number) * slope
                for b, n in self.near_half.items():
                    total = total - log_of(Fraction(2)) * (2 * n * b)
                if self.half_turns:
                    total = total + Constant.generator("I") * Constant.generator("pi") * self.half_turns
            else:
                factor = sum((n * (-b) ** k for b, n in self.near_one.items()), Fraction(0))
                for b, n in self.near_half.items():
                    factor += (2**k - 1) * n * (-b) ** k
                if factor:
                    total = total + zeta(k) * (factor / k)
            exponents[k] = total
        roots = sum(self.near_half.values())
        if roots % 2 or roots < 0:
            raise BoundaryError(
                f"a closed form has the factor pi^({Fraction(roots, 2)}), which is not supported"
            )
        return exponential(exponents).scaled(Constant.generator("pi") ** (roots // 2))


def on_line(form: GammaForm, values: Mapping[str, Rational], field: Ring) -> ClosedForm:
    """Express the kinematics by the ratios (or numbers, where there is no ratio).

    Parameters
    ----------
    form
        The closed form.
    values
        Each invariant as an element of `field`: the unit as +1 or -1, the others as their Euclidean
        sign times a ratio, or a function of the ratios, so that every scale of the form is positive at
        the corner where each ratio is much smaller than the one before it. Outside the Euclidean region a
        scale z that is linear in the invariants may be negative: a coefficient of F, it has -i0.
    field
        Q(eps, ratios).

    Raises
    ------
    BoundaryError
        If a Gamma function has a pole for all eps, an argument that is neither integer nor half-integer at
        eps = 0, a scale is negative, or a scale has a power that is not an integer at eps = 0.
    """
    rational = field.constant(form.prefactor)
    near_one: dict[Fraction, int] = {}
    near_half: dict[Fraction, int] = {}
    for arguments, sign in ((form.numerator, 1), (form.denominator, -1)):
        for argument in arguments:
            factor = _reduced_gamma(argument, field)
            rational = rational * factor if sign > 0 else rational / factor
            target = near_one if argument[0].denominator == 1 else near_half
            if argument[1] or target is near_half:
                target[argument[1]] = target.get(argument[1], 0) + sign
    half_turns = Fraction(0)
    letters: dict[Rational, Fraction] = {}
    numbers: dict[Fraction, Fraction] = {}
    for scale, (p, q) in form.scales:
        value = scale.substitute(values)
        if p.denominator > 2:
            raise BoundaryError(
                f"the scale {scale} has the power {p} at eps = 0: no integer, no half-integer"
            )
        rational = rational * (value if p.denominator == 1 else _root(value, scale)) ** p.numerator
        if not q:
            continue
        content, factors = value.factors()
        for polynomial, multiplicity in factors:
            letter = field.fraction(polynomial, field.context.constant(1))
            if not _positive_at_corner(letter):
                letter, content = -letter, content * (-1) ** multiplicity
            letters[letter] = letters.get(letter, Fraction(0)) + q * multiplicity
        if content < 0:
            if not scale.is_polynomial() or scale.numerator.total_degree() != 1:
                raise BoundaryError(
                    f"the scale {scale} is negative in the region of the solution, and on which side of its "
                    "branch point it lies is not known"
                )
            half_turns -= q
            content = -content
        if content != 1:
            numbers[content] = numbers.get(content, Fraction(0)) + q
    return ClosedForm(
        rational,
        tuple(sorted(((u, q) for u, q in letters.items() if q), key=lambda item: str(item[0]))),
        tuple(sorted((c, q) for c, q in numbers.items() if q)),
        form.loops,
        {b: n for b, n in near_one.items() if n},
        {b: n for b, n in near_half.items() if n},
        half_turns,
    )


def expand(closed: ClosedForm, order: int) -> Series:
    """Laurent expansion through ``eps^order`` of a closed form without a ratio (a number).

    Raises
    ------
    BoundaryError
        If it depends on a ratio, or needs a constant that is not known exactly.
    """
    if closed.letters or any(name != "eps" for name in closed.rational.variables()):
        raise BoundaryError("the closed form depends on a ratio; expand it with its local expansion")
    lowest = eps_valuation(closed.rational)
    if order < lowest:
        return Series(lowest, ())
    return laurent(closed.rational, order) * closed.transcendental(order - lowest + 1)


def _root(value: Rational, scale: Rational) -> Rational:
    """The square root that is positive near zero."""
    content, factors = value.factors()
    root = value.ring.one
    for number, target in ((content.numerator, 1), (content.denominator, -1)):
        exact = isqrt(max(number, 0))
        if number <= 0 or exact**2 != number:
            raise BoundaryError(
                f"a closed form has the square root of {scale} = {value}, which is not rational"
            )
        root = root * Fraction(exact) ** target
    for polynomial, multiplicity in factors:
        if multiplicity % 2:
            raise BoundaryError(
                f"a closed form has the square root of {scale} = {value}, which is not rational"
            )
        letter = value.ring.fraction(polynomial, value.ring.context.constant(1))
        root = root * (letter if _positive_at_corner(letter) else -letter) ** (multiplicity // 2)
    return root


def _positive_at_corner(letter: Rational) -> bool:
    """Sign of a polynomial where the last ratio of its field is much smaller than the one before it, ..."""
    names = (name for name in letter.ring.names if name != "eps")
    return is_positive_at(letter, tuple(reversed(tuple(names))))


def _reduced_gamma(argument: EpsLinear, field: Ring) -> Rational:
    """``Gamma(a + b eps)`` over ``Gamma(1 + b eps)``, or over ``Gamma(1/2 + b eps)`` for half-integer a."""
    a, b = argument
    if a.denominator > 2:
        raise BoundaryError(f"Gamma({a} + {b}*eps) is not expanded: {a} is neither integer nor half-integer")
    if b == 0 and a.denominator == 1 and a <= 0:
        raise BoundaryError(f"Gamma({a}) is infinite for all eps")
    base = Fraction(1) if a.denominator == 1 else Fraction(1, 2)
    slope = field.variable("eps") * b
    result = field.one
    while a > base:
        a -= 1
        result = result * (slope + a)
    while a < base:
        result = result / (slope + a)
        a += 1
    return result
