"""Expansions at a singular point: powers and logarithms of the distance, order by order in eps.

At distance h > 0 from the point along one invariant, ``f^(k) = sum_mj u_mj h^m log(h)^j/j!`` for the
canonical functions, and the transformation to the integrals is a Laurent series in h and eps.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import factorial

import flint

from ibpred.balls.context import Ball, complex_ball, precision
from ibpred.errors import UnfinishedError
from ibpred.exact.rational import Polynomial, Rational, ring
from ibpred.numerics.canonical import CanonicalSystem, Orders
from ibpred.numerics.centre import Place, centre_at
from ibpred.numerics.series import Level, constants_at, local_levels

DISTANCE = ring(("eps", "h"))
"""Q(eps, h)."""

Terms = Mapping[tuple[int, int], Ball]
"""(power of h, power of log h) -> coefficient."""


@dataclass(frozen=True)
class LocalFunctions:
    """Canonical functions near the point: for each order in eps the coefficients of ``log(h)^j/j!``.

    Attributes
    ----------
    levels
        ``levels[k][j][i]``: coefficients of h^0, h^1, ... of function i; None for zero.
    terms
        How many coefficients are kept.
    """

    levels: tuple[Level, ...]
    terms: int


def nearest_other(system: CanonicalSystem) -> Fraction:
    """A rational lower bound of the distance from h = 0 to the nearest other singular point (1 if none)."""
    found = [root.abs_lower() for letter in system.letters if letter.root() != 0 for root in letter.roots(64)]
    if not found:
        return Fraction(1)
    return Fraction(min(float(size) for size in found)).limit_denominator(2**20)


def local_functions(
    system: CanonicalSystem, values: Orders, h: Fraction, terms: int, bits: int
) -> LocalFunctions:
    """The functions near h = 0 from their values at a distance.

    Parameters
    ----------
    system
        The system in h.
    values
        Its functions at the distance h > 0, well inside the disc of convergence.
    terms
        How many powers of h are kept.
    bits
        Working precision.
    """
    vanishing = next((i for i, letter in enumerate(system.letters) if letter.root() == 0), None)
    centre = centre_at(system, flint.acb(0), vanishing, bits)
    with precision(bits):
        ball = complex_ball(h, 0, bits)
        place = Place(ball, ball.log())
    constants = constants_at(centre, place, values, bits)
    return LocalFunctions(local_levels(centre, constants, terms, bits), terms)


def entry_terms(entry: Rational, eps_order: int, h_order: int) -> dict[tuple[int, int], Fraction]:
    """Laurent coefficients of an element of Q(eps, h): first in eps through its order, then in h.

    Raises
    ------
    UnfinishedError
        If the lowest power of eps in the denominator has no coefficient free of eps.
    """
    above, shift_above = _by_eps(entry.numerator)
    below, shift_below = _by_eps(entry.denominator)
    start = shift_above - shift_below
    field = ring(("h",))
    found: dict[tuple[int, int], Fraction] = {}
    series: list[Rational] = []
    for k in range(max(eps_order - start + 1, 0)):
        total = above.get(k, field.zero)
        for j, before in enumerate(series):
            if before and k - j in below:
                total = total - before * below[k - j]
        series.append(total / below[0])
        for power, value in _in_h(series[-1], h_order).items():
            found[start + k, power] = value
    return found


def _by_eps(polynomial: Polynomial) -> tuple[dict[int, Rational], int]:
    field = ring(("h",))
    layers: dict[int, dict[tuple[int, ...], int]] = {}
    for exponents, coefficient in polynomial.to_dict().items():
        layers.setdefault(int(exponents[0]), {})[(int(exponents[1]),)] = int(coefficient)
    lowest = min(layers, default=0)
    one = field.context.constant(1)
    found = {k - lowest: Rational(field, field.polynomial(terms), one) for k, terms in layers.items()}
    return found, lowest


def _in_h(value: Rational, order: int) -> dict[int, Fraction]:
    if not value:
        return {}
    above = {int(e[0]): int(c) for e, c in value.numerator.to_dict().items()}
    below = {int(e[0]): int(c) for e, c in value.denominator.to_dict().items()}
    low = min(below)
    start = min(above) - low
    found: dict[int, Fraction] = {}
    for power in range(start, order + 1):
        total = Fraction(above.get(power + low, 0))
        for earlier, coefficient in found.items():
            total -= coefficient * below.get(power + low - earlier, 0)
        found[power] = total / below[low]
    return {power: coefficient for power, coefficient in found.items() if coefficient}


def lowest_power(entries: Sequence[Rational]) -> int:
    """The lowest power of h that any entry holds in its expansion (0 or negative)."""
    lowest = 0
    for entry in entries:
        if entry:
            place = entry.ring.index("h")
            above = min(int(e[place]) for e in entry.numerator.to_dict())
            below = min(int(e[place]) for e in entry.denominator.to_dict())
            lowest = min(lowest, above - below)
    return lowest


def check_separated(entries: Sequence[Rational]) -> None:
    """Refuse entries whose expansions in eps and in h do not commute.

    Raises
    ------
    UnfinishedError
        If a denominator has a factor that vanishes at eps = h = 0 and depends on both.
    """
    for entry in entries:
        for factor, multiplicity in entry.factors()[1] if entry else ():
            depends = [int(degree) > 0 for degree in factor.degrees()]
            terms = factor.to_dict()
            if multiplicity < 0 and all(depends) and (0, 0) not in {tuple(map(int, e)) for e in terms}:
                raise UnfinishedError(
                    f"the expansion in the distance does not exist order by order in eps: {entry} mixes them"
                )


def integral_terms(
    entries: Sequence[Rational],
    functions: LocalFunctions,
    start: int,
    order: int,
    highest: int,
    bits: int,
) -> dict[int, dict[tuple[int, int], Ball]]:
    """Expansion of ``sum_j entries[j] f_j``.

    Parameters
    ----------
    entries
        In Q(eps, h).
    functions, start
        The functions, from eps^start on.
    order, highest
        Highest powers of eps and of h.
    bits
        Working precision.

    Returns
    -------
    Power of eps -> (power of h, power of log h) -> coefficient.
    """
    found: dict[int, dict[tuple[int, int], Ball]] = {}
    with precision(bits):
        for column, entry in enumerate(entries):
            if not entry:
                continue
            for (a, b), factor in entry_terms(entry, order - start, highest).items():
                ball = complex_ball(factor, 0, bits)
                for k, level in enumerate(functions.levels):
                    power = a + start + k
                    if power > order:
                        break
                    for j, part in enumerate(level):
                        series = part[column]
                        if series is None:
                            continue
                        weight = ball / factorial(j)
                        for m, value in enumerate(series):
                            if b + m > highest:
                                break
                            if value.is_zero():
                                continue
                            terms = found.setdefault(power, {})
                            terms[b + m, j] = terms.get((b + m, j), flint.acb(0)) + weight * value
    return found
