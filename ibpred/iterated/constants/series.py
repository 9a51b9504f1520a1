"""Truncated Laurent series in eps with exact constants as coefficients."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

from ibpred.exact.rational import Polynomial, Rational
from ibpred.iterated.constants.constants import ONE, ZERO, Constant


@dataclass(frozen=True)
class Series:
    """``sum_k eps^(start + k) coefficients[k]``, known through the last coefficient held.

    Attributes
    ----------
    start
        Power of eps of the first coefficient.
    coefficients
        Exact constants; leading zeros are allowed.
    """

    start: int
    coefficients: tuple[Constant, ...]

    @property
    def end(self) -> int:
        """Highest power of eps that is known."""
        return self.start + len(self.coefficients) - 1

    def coefficient(self, order: int) -> Constant:
        """Coefficient of ``eps^order``.

        Raises
        ------
        ValueError
            If the series stops before.
        """
        if order > self.end:
            raise ValueError(f"eps^{order} asked of a series known through eps^{self.end}")
        return self.coefficients[order - self.start] if order >= self.start else ZERO

    def valuation(self) -> int:
        """Power of the first nonzero coefficient.

        Raises
        ------
        ValueError
            If all coefficients held vanish.
        """
        for k, value in enumerate(self.coefficients):
            if value:
                return self.start + k
        raise ValueError(f"the series vanishes through eps^{self.end}")

    def __add__(self, other: Series) -> Series:
        start, end = min(self.start, other.start), min(self.end, other.end)
        orders = range(start, end + 1)
        return Series(start, tuple(self.coefficient(k) + other.coefficient(k) for k in orders))

    def __mul__(self, other: Series) -> Series:
        length = min(len(self.coefficients), len(other.coefficients))
        result = [ZERO] * length
        for j in range(length):
            if self.coefficients[j]:
                for k in range(length - j):
                    if other.coefficients[k]:
                        result[j + k] = result[j + k] + self.coefficients[j] * other.coefficients[k]
        return Series(self.start + other.start, tuple(result))

    def scaled(self, factor: Constant | Fraction | int) -> Series:
        """The series times a constant."""
        return Series(self.start, tuple(c * factor for c in self.coefficients))


def exponential(exponents: Sequence[Constant]) -> Series:
    """``exp(sum_{k >= 1} exponents[k] eps^k)``, as many orders as given; ``exponents[0]`` must vanish."""
    if exponents and exponents[0]:
        raise ValueError("the exponent must vanish at eps = 0")
    result = [ONE]
    for n in range(1, len(exponents)):
        # n c_n = sum_k k e_k c_(n-k), from the derivative of the exponential
        total = ZERO
        for k in range(1, n + 1):
            if exponents[k]:
                total = total + exponents[k] * result[n - k] * Fraction(k, n)
        result.append(total)
    return Series(0, tuple(result))


def eps_valuation(value: Rational) -> int:
    """Order of vanishing at eps = 0 of a nonzero element of a field that holds ``eps`` (negative: a pole)."""
    return _lowest(value.numerator, value.ring.index("eps")) - _lowest(
        value.denominator, value.ring.index("eps")
    )


def laurent(value: Rational, order: int) -> Series:
    """Laurent expansion at eps = 0 of a rational function of eps alone.

    Parameters
    ----------
    value
        Depends on no other variable than ``eps``.
    order
        Highest power of eps wanted.

    Raises
    ------
    ValueError
        If another variable occurs.
    """
    if any(name != "eps" for name in value.variables()):
        raise ValueError(f"{value} depends on more than eps")
    if not value:
        return Series(0, (ZERO,) * max(order + 1, 1))
    place = value.ring.index("eps")
    start = eps_valuation(value)
    if order < start:
        return Series(start, ())
    above, below = _coefficients(value.numerator, place), _coefficients(value.denominator, place)
    quotient: list[Fraction] = []
    for n in range(order - start + 1):
        total = Fraction(above[n]) if n < len(above) else Fraction(0)
        for k in range(1, min(n, len(below) - 1) + 1):
            total -= below[k] * quotient[n - k]
        quotient.append(total / below[0])
    return Series(start, tuple(Constant.rational(q) for q in quotient))


def _lowest(polynomial: Polynomial, place: int) -> int:
    return min((int(exponents[place]) for exponents in polynomial.monoms()), default=0)


def _coefficients(polynomial: Polynomial, place: int) -> list[int]:
    """Coefficients of the powers of eps from the lowest that occurs."""
    terms = {int(e[place]): int(c) for e, c in polynomial.to_dict().items()}
    lowest = min(terms)
    return [terms.get(k, 0) for k in range(lowest, max(terms) + 1)]
