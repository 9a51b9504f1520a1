"""Coefficients of reductions near a point: Laurent series in eps, then in the distance h."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction

import flint

from ibpred.balls.context import Ball, complex_ball, precision
from ibpred.errors import UnfinishedError
from ibpred.exact.rational import Polynomial, Rational, ring
from ibpred.iterated.constants.series import eps_valuation
from ibpred.numerics.laurent.local_laurent import Terms

DISTANCE = ring(("eps", "h"))
"""Q(eps, h)."""


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
    entries: Mapping[int, Rational],
    masters: Sequence[Mapping[int, Terms]],
    order: int,
    highest: int,
    bits: int,
) -> dict[int, dict[tuple[Fraction, int], Ball]]:
    """Expansion of a combination of the masters.

    Parameters
    ----------
    entries
        Number of the master -> coefficient in Q(eps, h).
    masters
        Their expansions (see `ibpred.numerics.laurent.local_laurent.master_terms`), far enough.
    order, highest
        Highest powers of eps and of h.
    bits
        Working precision.

    Returns
    -------
    Power of eps -> (power of h, power of log h) -> coefficient.
    """
    found: dict[int, dict[tuple[Fraction, int], Ball]] = {}
    with precision(bits):
        for index, entry in entries.items():
            expansion = masters[index]
            if not entry or not expansion:
                continue
            least = min((power for terms in expansion.values() for power, _ in terms), default=Fraction(0))
            reach = int(highest - least // 1)
            for (a, b), factor in entry_terms(entry, order - min(expansion), reach).items():
                ball = complex_ball(factor, 0, bits)
                for k, terms in expansion.items():
                    if a + k > order:
                        continue
                    target = found.setdefault(a + k, {})
                    for (power, log), value in terms.items():
                        if power + b <= highest:
                            key = (power + b, log)
                            target[key] = target.get(key, flint.acb(0)) + ball * value
    return found


def needed_orders(entries: Sequence[Mapping[int, Rational]], order: int) -> int:
    """The highest power of eps of the masters that combinations need through ``eps^order``."""
    return max(
        (order - eps_valuation(entry) for row in entries for entry in row.values() if entry), default=order
    )
