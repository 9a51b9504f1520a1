"""Clausen and log-sine values: constants of iterated integrals whose letters are sixth roots of unity.

They appear where three equal masses meet, as in vacuum graphs (Broadhurst, hep-th/9803091; Fleischer,
Kalmykov, hep-ph/9907431; Davydychev, Kalmykov, hep-th/0303162). With

``Cl_n(t) = sum_k sin(k t) / k^n`` (n even) and ``Ls_n(t) = -int_0^t log^(n-1) |2 sin(s/2)| ds``

the log-sines follow from ``log(1 - e^(i s)) = log(2 sin(s/2)) + i (s - pi)/2`` and

``int_0^t log^p(1 - e^(i s)) ds = i H_p(1 - e^(i t))``,
``H_p(u) = sum_k (-1)^k p!/(p-k)! log^(p-k)(u) Li_(k+1)(u)``.
"""

from __future__ import annotations

from math import factorial

import flint

from ibpred.balls.context import Ball, RealBall, precision


def clausen_at_third(n: int, bits: int) -> RealBall:
    """``Cl_n(pi/3)`` for even n."""
    with precision(bits + 16):
        return _root(1).polylog(n).imag


def log_sine_at_two_thirds(n: int, bits: int) -> RealBall:
    """``Ls_n(2 pi/3)`` for n = 3 or 4.

    Raises
    ------
    ValueError
        For another n.
    """
    if n not in (3, 4):
        raise ValueError(f"log-sine values are computed for n = 3 and 4, not {n}")
    bits += 32
    with precision(bits):
        root, pi = _root(2), flint.arb.pi()
        whole = _antiderivative(n - 1, 1 - root).imag
        if n == 3:
            # int psi^2 with psi = (s - pi)/2
            return whole - 13 * pi**3 / 162
        # 3 int log(2 sin(s/2)) psi^2, by parts: the integral of the logarithm is -Cl_2
        clausen = [root.polylog(k) for k in (2, 3, 4)]
        mixed = (
            -(pi**2) / 36 * clausen[0].imag
            + pi / 6 * clausen[1].real
            - pi / 2 * flint.arb(3).zeta()
            + clausen[2].imag / 2
        )
        return whole - 3 * mixed


def _root(sixths: int) -> Ball:
    """``exp(i pi sixths/3)`` for one or two sixths of a turn."""
    return flint.acb(flint.arb(1 if sixths == 1 else -1) / 2, flint.arb(3).sqrt() / 2)


def _antiderivative(p: int, u: Ball) -> Ball:
    """``H_p(u)``."""
    logarithm = u.log()
    total = flint.acb(0)
    for k in range(p + 1):
        factor = (-1) ** k * (factorial(p) // factorial(p - k))
        total += factor * logarithm ** (p - k) * u.polylog(k + 1)
    return total
