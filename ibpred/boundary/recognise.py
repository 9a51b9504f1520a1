"""Recognise numbers as rational combinations of constants of given weights, by integer relations.

A lattice is spanned by the unit vectors, each extended by its constant (and the number to be recognised)
times ``10^digits``; a short vector of it (Lenstra, Lenstra, Lovasz, Math. Ann. 261 (1982) 515) is a relation.
How often chance alone would give one as short is estimated by counting vectors.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import floor, log10

import flint

from ibpred.balls.context import Ball, RealBall, precision
from ibpred.errors import BoundaryError
from ibpred.iterated.constants.constants import ZERO, Constant
from ibpred.iterated.constants.generators import Monomial, is_odd, monomials_of_weight
from ibpred.iterated.constants.series import Series

_BITS_PER_DIGIT = 3.3219280948873626

SINGLE_SCALE = ("pi", "zeta3", "zeta5", "zeta7", "zeta53", "zeta9")
"""Generators of multiple zeta values."""

ALTERNATING = ("log2", "li4half", "li5half", "li6half", "li51half", *SINGLE_SCALE)
"""Those of alternating sums as well, complete to weight 6."""

SIXTH_ROOTS = ("sqrt3", "log3", "clausen2", "logsine3", "clausen4", "logsine4", *SINGLE_SCALE)
"""Those of sixth roots of unity that equal masses bring (Broadhurst, hep-th/9803091), to weight 4."""


@dataclass(frozen=True)
class Fit:
    """A number recognised.

    Attributes
    ----------
    constant
        The exact constant.
    digits
        Decimal digits to which the number was known and agrees.
    odds
        Decimal logarithm of the expected number of relations as good as this one between random
        numbers: -20 means that chance would do this once in 10^20.
    """

    constant: Constant
    digits: int
    odds: int


def basis_of_weights(weights: Sequence[int], generators: Sequence[str], odd: bool) -> tuple[Monomial, ...]:
    """All real monomials of some weights in some generators.

    Parameters
    ----------
    weights
        The weights.
    generators
        Names of generators besides I.
    odd
        False for those of real parts of iterated integrals (pi in even powers, ``sqrt3*pi``, ...), True for
        those of imaginary parts.
    """
    steps = dict.fromkeys(generators, 1)
    monomials = (m for weight in weights for m in monomials_of_weight(weight, steps))
    return tuple(dict.fromkeys(m for m in monomials if is_odd(m) == odd))


def recognise(value: Ball, weights: Sequence[int], generators: Sequence[str], odds: int) -> Fit | None:
    """Fit a number by constants of given weights.

    Parameters
    ----------
    value
        A complex ball. Its real part is fitted with even powers of pi and their like, its imaginary part
        with odd ones; an imaginary part that is exactly zero is left alone.
    weights
        Weights allowed; a single one for a pure function.
    generators
        Names of the constants allowed besides I, e.g. `SINGLE_SCALE`.
    odds
        The largest decimal logarithm of the odds of a chance hit that is accepted, e.g. -10.

    Returns
    -------
    Fit or None
        None where the number is not known well enough or is no such combination.
    """
    total, digits, worst = ZERO, [], []
    for part, imaginary in ((value.real, False), (value.imag, True)):
        if imaginary and part.is_zero():
            continue
        basis = basis_of_weights(weights, generators, imaginary)
        fitted = _fit(part, basis, odds)
        if fitted is None:
            return None
        constant, known, chance = fitted
        total = total + (Constant.generator("I") * constant if imaginary else constant)
        digits.append(known)
        worst.append(chance)
    return Fit(total, min(digits), max(worst))


def blurred(value: Ball, digits: int) -> Ball:
    """A value whose exact parts are known to so many digits only.

    What vanishes within the errors of a numerical method is given as an exact zero; it supports a fit with
    the digits of the method, no more.
    """
    parts = []
    for part in (value.real, value.imag):
        if part.rad().is_zero():
            part = part + flint.arb(0, flint.arb(10) ** -digits)
        parts.append(part)
    return flint.acb(*parts)


def _fit(number: RealBall, basis: Sequence[Monomial], odds: int) -> tuple[Constant, int, int] | None:
    """Constant, digits and odds for a real number."""
    if not number.is_finite():
        return None
    digits = _known_digits(number)
    if digits < 1:
        return None
    if not basis:
        # no constant of these weights but zero
        return (ZERO, digits, -digits) if number.contains(0) and -digits <= odds else None
    bits = int((digits + 10) * _BITS_PER_DIGIT)
    with precision(bits):
        values = [Constant.from_terms({m: Fraction(1)}).ball(bits).real for m in basis]
        scale = flint.arb(10) ** digits
        columns = [_nearest(v * scale) for v in (number, *values)]
        size = len(columns)
        rows = [[int(i == j) for j in range(size)] + [columns[i]] for i in range(size)]
        for row in flint.fmpz_mat(rows).lll().tolist():
            relation = [int(v) for v in row[:size]]
            if relation[0]:
                break
        else:
            return None
        terms = {m: Fraction(-c, relation[0]) for m, c in zip(basis, relation[1:], strict=True) if c}
        constant = Constant.from_terms(terms)
        if not constant.ball(bits).real.overlaps(number):
            return None
    chance = _odds(relation, [float(v) for v in values], digits)
    return (constant, digits, chance) if chance <= odds else None


def _known_digits(number: RealBall) -> int:
    """Decimal digits after the point that the radius leaves."""
    radius = number.rad()
    if radius.is_zero():
        return int(flint.ctx.prec / _BITS_PER_DIGIT)
    mantissa, exponent = (int(v) for v in radius.man_exp())
    size: float = log10(mantissa) + exponent * log10(2)
    return floor(-size)


def _nearest(value: RealBall) -> int:
    return int((value.mid() + 0.5).floor().unique_fmpz())


def _odds(relation: Sequence[int], values: Sequence[float], digits: int) -> int:
    """Decimal logarithm of the expected number of relations with coefficients as small, within the error."""
    height = max(abs(c) for c in relation)
    vectors = len(relation) * log10(2 * height + 1)
    # of random sums of this height, the share that falls within the error of the number
    window = log10(2 * abs(relation[0])) - digits
    spread = log10(height * max(*(abs(v) for v in values), 1e-300))
    return floor(vectors + window - spread) + 1


def recognise_series(
    values: Mapping[int, Ball], loops: int, alphabets: Sequence[Sequence[str]], odds: int
) -> tuple[Series, tuple[Fit, ...]]:
    """Fit the Laurent coefficients of one integral without a scale that varies.

    Parameters
    ----------
    values
        Power of eps -> value, all powers between the lowest and the highest; powers below vanish.
    loops
        L: the weight at eps^k is at most 2 L + k (in four dimensions).
    alphabets
        Sets of generators, tried in turn.
    odds
        As for `recognise`.

    Returns
    -------
    tuple
        The series and the fit of each of its coefficients.

    Raises
    ------
    BoundaryError
        If a coefficient is not recognised (names the power of eps).
    """
    fits = []
    for order in range(min(values), max(values) + 1):
        highest = 2 * loops + order
        # few constants first: they need fewer digits
        choices = [(highest,), *(tuple(range(top, -1, -1)) for top in range(highest + 1))]
        trials = ((chosen, names) for chosen in choices for names in alphabets)
        fit = next((f for w, g in trials if (f := recognise(values[order], w, g, odds)) is not None), None)
        if fit is None:
            listed = ", ".join(dict.fromkeys(name for names in alphabets for name in names))
            raise BoundaryError(
                f"the value {values[order].str(12)} at eps^{order} is no combination of the constants "
                f"{listed} up to weight {highest} that chance would not give as well; "
                "more digits may help"
            )
        fits.append(fit)
    return Series(min(values), tuple(fit.constant for fit in fits)), tuple(fits)
