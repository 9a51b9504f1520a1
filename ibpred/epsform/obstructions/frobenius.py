"""The Frobenius basis of an operator at a point of maximal unipotent monodromy.

With theta = t d/dt the operator is ``theta^n + sum_k p_k(t) theta^k``, p_k(0) = 0. Its solutions are
``psi_j = sum_i log(t)^i/i! s_(j-i)(t)`` with s_0(0) = 1, s_i(0) = 0; in them it is a chain of derivations

    theta (1/a_(n-1)) theta ... (1/a_1) theta (1/psi_0),

with power series a_k that start with 1.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import flint

from ibpred.epsform.obstructions.power_series import Series, inverse, theta, times


@dataclass(frozen=True)
class Chain:
    """The chain of derivations.

    Attributes
    ----------
    period
        psi_0, the holomorphic solution.
    kernels
        a_1, ..., a_(n-1).
    """

    period: Series
    kernels: tuple[Series, ...]


def frobenius_basis(lower: Sequence[Series], length: int) -> tuple[Series, ...]:
    """s_0, ..., s_(n-1) modulo t^length.

    Parameters
    ----------
    lower
        p_0, ..., p_(n-1).
    length
        Terms wanted.
    """
    size = len(lower)
    # coefficients c_m(e) mod e^n of t^(m+e): (m+e)^n c_m = -sum_(k, l>0) p_k[l] (m-l+e)^k c_(m-l)
    found = [flint.fmpq_poly([1])]
    for m in range(1, length):
        total = flint.fmpq_poly([0])
        for previous in range(m):
            shift = flint.fmpq_poly([previous, 1])
            weight, power = flint.fmpq_poly([0]), flint.fmpq_poly([1])
            for p in lower:
                weight = weight + power * p[m - previous]
                power = times(power, shift, size)
            total = total - times(weight, found[previous], size)
        head = inverse(flint.fmpq_poly([m, 1]) ** size, size)
        found.append(times(total, head, size))
    return tuple(flint.fmpq_poly([c[j] for c in found]) for j in range(size))


def chain(lower: Sequence[Series], length: int) -> Chain:
    """The chain of derivations of an operator, modulo t^length."""
    basis = frobenius_basis(lower, length)
    size = len(basis)
    # psi_j as polynomials in log t: coefficient of log^i/i! is s_(j-i)
    current = [[basis[j - i] for i in range(j + 1)] for j in range(size)]
    divisor = basis[0]
    kernels = []
    for k in range(1, size):
        factor = inverse(divisor, length)
        current = [[times(s, factor, length) for s in logs] for logs in current]
        # theta of sum_i log^i/i! s_i is sum_i log^i/i! (theta s_i + s_(i+1))
        current = [
            [theta(s) + (logs[i + 1] if i + 1 < len(logs) else 0) for i, s in enumerate(logs)]
            for logs in current
        ]
        current = [logs[:-1] if len(logs) > 1 else logs for logs in current]
        divisor = current[k][0]
        kernels.append(divisor)
    return Chain(basis[0], tuple(kernels))
