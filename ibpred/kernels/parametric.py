"""Lattice sums of one sector of a Feynman-parameter integral, expanded in eps.

The integrand over the unit cube is

``prod_j t_j^(a_j + b_j eps) Q(t) U(t)^(u0 + u1 eps) F(t)^(f0 + f1 eps)``

with U and F positive on the closed cube. Some variables ("singular" ones) have a_j = -1; there

``int_0^1 t^(-1 + b eps) g(t) dt = g(0)/(b eps) + int_0^1 t^(-1 + b eps) (g(t) - g(0)) dt``

is applied, so that everything is needed at all 2^k points where some singular variables are zero.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit


@njit(cache=True)
def sector_sums(  # type: ignore[no-untyped-def]
    generator,
    points,
    shifts,
    u_exponents,
    u_coefficients,
    f_exponents,
    f_coefficients,
    q_exponents,
    q_coefficients,
    u_power,
    f_power,
    slopes,
    constants,
    singular,
    terms,
):
    """Mean over a shifted lattice of the expanded integrand.

    Parameters
    ----------
    generator, points, shifts
        int64 (n,), the lattice ``frac(k * generator / points + shift)``; float64 (shifts, n).
    u_exponents, u_coefficients, f_..., q_...
        Polynomials: int64 (terms, n), float64 (terms,).
    u_power, f_power
        float64 (2,): constant and slope in eps of the powers of U and F.
    slopes, constants
        float64 (n,): b_j and a_j.
    singular
        int64 (k,): the variables with a_j = -1, for which b_j is not zero.
    terms
        Number of coefficients wanted.

    Returns
    -------
    array
        (shifts, terms): coefficients of eps^-k, eps^(1-k), ...
    """
    n = generator.shape[0]
    depth = singular.shape[0]
    corners = 1 << depth
    position = np.full(n, -1, np.int64)
    for k in range(depth):
        position[singular[k]] = k
    u_mask = _masks(u_exponents, position)
    f_mask = _masks(f_exponents, position)
    q_mask = _masks(q_exponents, position)
    highest = 1
    for exponents in (u_exponents, f_exponents, q_exponents):
        for m in range(exponents.shape[0]):
            for j in range(n):
                highest = max(highest, exponents[m, j])
    powers = np.ones((n, highest + 1))
    logs = np.zeros(n)
    u_corner, f_corner, q_corner = np.zeros(corners), np.zeros(corners), np.zeros(corners)
    series = np.zeros((corners, terms))
    growth = np.zeros(terms)
    difference = np.zeros(terms)
    result = np.zeros((shifts.shape[0], terms))
    step = generator / points
    for s in range(shifts.shape[0]):
        for p in range(points):
            weight = 1.0
            regular = 0.0
            for j in range(n):
                u = p * step[j] + shifts[s, j]
                u -= np.floor(u)
                t = u * u * u * (10.0 - 15.0 * u + 6.0 * u * u)
                if t <= 0.0:
                    t = 1e-300
                weight *= 30.0 * u * u * (1.0 - u) * (1.0 - u)
                logs[j] = np.log(t)
                for e in range(1, highest + 1):
                    powers[j, e] = powers[j, e - 1] * t
                if position[j] < 0:
                    regular += slopes[j] * logs[j]
                    if constants[j] != 0.0:
                        weight *= t ** constants[j]
            if weight == 0.0:
                continue
            _corner_values(u_exponents, u_coefficients, u_mask, powers, u_corner)
            _corner_values(f_exponents, f_coefficients, f_mask, powers, f_corner)
            _corner_values(q_exponents, q_coefficients, q_mask, powers, q_corner)
            for z in range(corners):  # bit k of z: singular variable k is zero
                log_u, log_f = np.log(u_corner[z]), np.log(f_corner[z])
                value = q_corner[z] * weight * np.exp(u_power[0] * log_u + f_power[0] * log_f)
                rate = regular + u_power[1] * log_u + f_power[1] * log_f
                for m in range(terms):
                    series[z, m] = value
                    value *= rate / (m + 1)
            size = corners
            for k in range(depth - 1, -1, -1):  # series gains a factor 1/eps at each step
                j = singular[k]
                size >>= 1
                inverse = 1.0 / slopes[j]
                factor = 1.0 / powers[j, 1]
                for m in range(terms):
                    growth[m] = factor
                    factor *= slopes[j] * logs[j] / (m + 1)
                for z in range(size):
                    for m in range(terms):
                        difference[m] = series[z, m] - series[z + size, m]
                    for m in range(terms):
                        total = series[z + size, m] * inverse
                        for i in range(m):
                            total += growth[i] * difference[m - 1 - i]
                        series[z, m] = total
            for m in range(terms):
                result[s, m] += series[0, m]
        for m in range(terms):
            result[s, m] /= points
    return result


@njit(cache=True)
def _masks(exponents: Any, position: Any) -> Any:
    """Which singular variables each term contains, as bits."""
    masks = np.zeros(exponents.shape[0], np.int64)
    for m in range(exponents.shape[0]):
        for j in range(exponents.shape[1]):
            if exponents[m, j] > 0 and position[j] >= 0:
                masks[m] |= 1 << position[j]
    return masks


@njit(cache=True)
def _corner_values(exponents: Any, coefficients: Any, masks: Any, powers: Any, corner: Any) -> None:
    """Values of a polynomial with every subset of the singular variables set to zero."""
    corners = corner.shape[0]
    corner[:] = 0.0
    for m in range(exponents.shape[0]):
        value = coefficients[m]
        for j in range(exponents.shape[1]):
            if exponents[m, j] > 0:
                value *= powers[j, exponents[m, j]]
        corner[masks[m]] += value
    # corner[mask] holds the terms that contain exactly these variables: sum over subsets, then complement
    bit = 1
    while bit < corners:
        for z in range(corners):
            if z & bit:
                corner[z] += corner[z ^ bit]
        bit <<= 1
    for z in range(corners // 2):
        other = corners - 1 - z
        corner[z], corner[other] = corner[other], corner[z]
