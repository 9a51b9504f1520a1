"""Rigorous tails of the local series of a canonical system.

With s = h/rho, rho the distance to the nearest other letter, and the formal series
``lambda = log(1/(1-s))``, the coefficients of ``f^(k) = sum_mj h^m L^j/j! u_mj`` (L = log h) obey

    ``u_mj (L-part) = (1/m) sum_i (-1/m)^i r_{m,j+i}``,  m >= 1,

where r collects ``A_0 f^(k-1)`` and ``sum_l A_l h/(h-d_l) f^(k-1)``. Since ``|d_l|^-m <= (rho/|d_l|)
rho^-m``, the moduli are bounded coefficient by coefficient by

    ``sum_ij b_k[i][j] lambda^i/i! L^j/j!``,   ``b_k[i] = K(|A| b_{k-1}[i-1] + |A_0| b_{k-1}[i])``,

with ``|A| = sum_l rho/|d_l| |A_l|`` entry by entry, ``K(b)[j] = sum_{j'>=j} b[j']``, and ``b_k[0]`` the
moduli of the terms with m = 0. The coefficient of s^m in lambda^i/i! is at most
``H_{m-1}^(i-1) / (m (i-1)!)``, and from m = N on these bounds fall at least as fast as a geometric
series of ratio ``q (1 + 1/(N H_{N-1}))^(i-1)``, q = |h|/rho. (This is the method of majorants in
Cauchy's form; everything is rounded outwards.)
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import factorial

import flint

from ibpred.balls.context import RealBall, precision
from ibpred.errors import PrecisionError

Bounds = list[list[list[RealBall]]]
"""``bounds[i][j][row]`` of one order in eps."""

BoundRows = tuple[tuple[int, tuple[tuple[int, RealBall], ...]], ...]

_BITS = 64


@dataclass(frozen=True)
class Majorant:
    """Entrywise bounds of the matrices around a centre.

    Attributes
    ----------
    size
        Number of functions.
    residue
        ``|A_0|``, empty at a regular centre.
    others
        ``sum_l rho/|d_l| |A_l|``.
    """

    size: int
    residue: BoundRows
    others: BoundRows

    def zero(self) -> list[RealBall]:
        return [flint.arb(0)] * self.size

    def next_order(self, constant: Sequence[Sequence[RealBall]], previous: Bounds) -> Bounds:
        """Bounds of the next order.

        Parameters
        ----------
        constant
            ``constant[j][row]``: moduli of the terms with m = 0.
        previous
            Bounds of the order before; empty for the first one.
        """
        with precision(_BITS):
            depth = len(constant)
            bounds: Bounds = [[list(part) for part in constant]]
            for i in range(1, len(previous) + 1):
                sums = [self.zero() for _ in range(depth)]
                for j in range(len(previous[0]) if previous else 0):
                    _add_product(sums[j], self.others, previous[i - 1][j])
                    if i < len(previous):
                        _add_product(sums[j], self.residue, previous[i][j])
                for j in reversed(range(depth - 1)):
                    sums[j] = [a + b for a, b in zip(sums[j], sums[j + 1], strict=True)]
                bounds.append(sums)
            return bounds


def _add_product(target: list[RealBall], rows: BoundRows, vector: Sequence[RealBall]) -> None:
    for row, entries in rows:
        total = target[row]
        for column, value in entries:
            total = total + value * vector[column]
        target[row] = total


def tail_factors(ratio: RealBall, terms: int, count: int) -> list[RealBall]:
    """Bounds of the remainders of ``lambda^i/i!``, i < count, from the power `terms` on.

    Parameters
    ----------
    ratio
        q = |h|/rho, a ball below one.
    terms
        N >= 2: first power left out.
    count
        How many; the first (i = 0) is zero.

    Raises
    ------
    PrecisionError
        If the series cannot be bounded with so few terms.
    """
    with precision(_BITS):
        factors = [flint.arb(0)]
        harmonic = flint.arb(terms).digamma() + flint.arb.const_euler()
        for i in range(1, count):
            first = ratio**terms * harmonic ** (i - 1) / (terms * factorial(i - 1))
            fall = ratio * (1 + 1 / (terms * harmonic)) ** (i - 1)
            if not fall < 1:
                raise PrecisionError(
                    f"the remainder of a series after {terms} terms at {ratio.str(3)} of its radius of "
                    "convergence cannot be bounded; raise the working precision"
                )
            factors.append((first / (1 - fall)).upper())
        return factors


def remainder(bounds: Bounds, logarithm: RealBall, factors: Sequence[RealBall], row: int) -> RealBall:
    """Bound of the remainder of one function: ``sum_ij b[i][j] |L|^j/j! tail_i``."""
    with precision(_BITS):
        total = flint.arb(0)
        for i in range(1, len(bounds)):
            power = flint.arb(1)
            for j, part in enumerate(bounds[i]):
                if j:
                    power = power * logarithm / j
                if not part[row].is_zero():
                    total = total + part[row] * power * factors[i]
        return total.upper() if not total.is_zero() else total
