"""Feynman-parameter integrals in the Euclidean region, to a few digits, with error estimates."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from math import factorial

import numpy as np
from numpy.typing import NDArray

from ibpred.errors import InputError
from ibpred.numerics.direct.fan import simplicial_fan
from ibpred.numerics.direct.lattice import lattice, prime_at_least
from ibpred.numerics.direct.polynomial import Exponents, Terms, without
from ibpred.numerics.direct.prefactor import Series, exponential, gamma_series
from ibpred.numerics.direct.sector import Integrand, differentiated, logarithmic, on_cone

_SHIFTS = 12
_PILOT = 0.15  # share of the samples that goes into finding where the others are needed
_FEWEST = 61  # points of the smallest lattice


def direct_integral(
    u_terms: Mapping[Exponents, float],
    f_terms: Mapping[Exponents, float],
    powers: Sequence[int],
    loops: int,
    dimension: int,
    order: int,
    seed: int,
    samples: int,
) -> dict[int, tuple[float, float]]:
    """Laurent coefficients of one integral by sector decomposition and quasi-Monte Carlo.

    The convention is that of the package: d = dimension - 2 eps, measure
    ``exp(L eps gamma_E) prod d^d k/(i pi^(d/2))``, lines ``m2 - q^2``, so that

    ``I = exp(L eps gamma_E) Gamma(a - L d/2) / prod_i Gamma(a_i)
    int delta(1 - sum x) prod_i x_i^(a_i - 1) U^(a - (L+1) d/2) / F^(a - L d/2)``

    with a the sum of the powers. Sectors: T. Kaneko, T. Ueda, arXiv:0908.2897; integration by
    shifted lattices after a periodising substitution, as in S. Borowka et al., arXiv:1811.11720.

    Parameters
    ----------
    u_terms, f_terms
        U and F: exponents of all parameters to coefficients. Terms without a parameter of a line
        with power <= 0 must be positive (the Euclidean region).
    powers
        Of all lines; zero and negative ones are allowed.
    order
        Highest power of eps wanted.
    seed
        Of the random shifts.
    samples
        Points per integrand on average, all shifts together.

    Returns
    -------
    dict
        Power of eps to (value, error); the error is one standard deviation as estimated from the
        random shifts, no rigorous bound. Powers below the lowest possible pole are absent.

    Raises
    ------
    InputError
        If the integral is scaleless, is not regulated, or U or F has negative terms.
    """
    parts, lines = _without_lines(dict(u_terms), dict(f_terms), powers, loops, dimension, order)
    total = sum(powers)
    length = len(parts[0].series) if parts else 0
    front = gamma_series(total - loops * dimension / 2, loops, length)
    rates = np.zeros(length)
    if length > 1:
        rates[1] = loops * np.euler_gamma
    front = front.times(exponential(rates, length))
    norm = 1.0
    for power in powers:
        norm *= factorial(power - 1) if power > 0 else 1.0
    front = Series(front.lowest, front.coefficients / norm)
    integrands = _integrands(parts, lines)
    depth = max((_depth(item) for item in integrands), default=0)
    wanted = order - front.lowest + depth + 1
    value, variance = np.zeros(max(wanted, 0)), np.zeros(max(wanted, 0))
    if wanted > 0:
        value, variance = _integrate(integrands, depth, front, wanted, seed, samples)
    lowest = front.lowest - depth
    return {
        lowest + k: (float(value[k]), float(np.sqrt(variance[k])))
        for k in range(wanted)
    }


def _without_lines(
    u: Terms, f: Terms, powers: Sequence[int], loops: int, dimension: int, order: int
) -> tuple[list[Integrand], int]:
    """The integrand in the parameters of the lines with positive powers, and their number."""
    n = len(powers)
    for name, terms in (("U", u), ("F", f)):
        if any(len(e) != n for e in terms):
            raise InputError(f"the exponents of {name} and the {n} powers differ in length")
    total = sum(powers)
    half = dimension / 2
    # enough coefficients for a pole of 1/eps from each parameter and from the Gamma function
    length = order + 2 * loops + n + 3
    if length < 1:
        length = 1
    series = (1.0,) + (0.0,) * (length - 1)
    exponents = tuple((float(max(power, 0)), 0.0) for power in powers)
    one = {(0,) * n: 1.0}
    u_power = (total - (loops + 1) * half, float(loops + 1))
    f_power = (-total + loops * half, -float(loops))
    parts = [Integrand(series, exponents, one, u, f, u_power, f_power)]
    for i in reversed(range(n)):
        if powers[i] <= 0:
            parts = [new for part in parts for new in differentiated(part, i, -powers[i])]
    for part in parts:
        for name, terms in (("U", part.u), ("F", part.f)):
            if not terms:
                raise InputError(f"{name} vanishes for these lines: the integral is scaleless")
            if min(terms.values()) < 0:
                raise InputError(f"{name} has negative terms: the point is outside the Euclidean region")
    return parts, sum(power > 0 for power in powers)


def _integrands(parts: list[Integrand], lines: int) -> list[Integrand]:
    """All sectors of all parts."""
    if not parts:
        return []
    last = lines - 1
    flat = [
        Integrand(
            part.series,
            part.exponents[:-1],
            without(part.q, last, value=1),
            without(part.u, last, value=1),
            without(part.f, last, value=1),
            part.u_power,
            part.f_power,
        )
        for part in parts
    ]
    u_points = np.array(list(flat[0].u), dtype=np.int64).reshape(-1, last)
    f_points = np.array(list(flat[0].f), dtype=np.int64).reshape(-1, last)
    points = (u_points[:, None, :] + f_points[None, :, :]).reshape(-1, last)
    cones = simplicial_fan(points)
    return [item for part in flat if part.q for cone in cones for item in logarithmic(on_cone(part, cone))]


def _singular(item: Integrand) -> NDArray[np.int64]:
    return np.array([j for j, (a, _) in enumerate(item.exponents) if abs(a + 1) < 1e-9], dtype=np.int64)


def _depth(item: Integrand) -> int:
    return len(_singular(item))


@dataclass(frozen=True)
class _Estimate:
    value: NDArray[np.float64]
    variance: NDArray[np.float64]
    points: int


def _integrate(
    integrands: list[Integrand], depth: int, front: Series, wanted: int, seed: int, samples: int
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Sum of all integrands times the front factor, and its variance."""
    random = np.random.default_rng(seed)
    pilot = max(_FEWEST, int(samples * _PILOT / _SHIFTS))
    first = [_lattice_sum(item, depth, front, wanted, pilot, random) for item in integrands]
    # the error falls about like 1/points: points in proportion to the square root of the errors
    spread = np.array([float(np.sqrt(item.variance[-1])) for item in first])
    share = np.sqrt(spread / spread.sum()) if spread.sum() > 0 else np.zeros(len(first))
    budget = samples * (1 - _PILOT) * len(first) / _SHIFTS
    value, variance = np.zeros(wanted), np.zeros(wanted)
    for item, old, part in zip(integrands, first, share, strict=True):
        points = int(budget * part / share.sum()) if share.sum() > 0 else 0
        best = old
        if points > 2 * old.points:
            best = _lattice_sum(item, depth, front, wanted, points, random)
        value += best.value
        variance += best.variance
    return value, variance


def _lattice_sum(
    item: Integrand, depth: int, front: Series, wanted: int, points: int, random: np.random.Generator
) -> _Estimate:
    """One integrand times the front factor, aligned to the deepest pole of all integrands."""
    from ibpred.kernels.parametric import sector_sums

    n = len(item.exponents)
    points = prime_at_least(points)
    singular = _singular(item)
    missing = depth - len(singular)
    terms = wanted - missing
    if terms <= 0:
        return _Estimate(np.zeros(wanted), np.zeros(wanted), points)
    shifts = random.random((_SHIFTS, n))

    def arrays(poly: Terms) -> tuple[NDArray[np.int64], NDArray[np.float64]]:
        exponents = np.array(list(poly), dtype=np.int64).reshape(len(poly), n)
        return exponents, np.array(list(poly.values()))

    lines = np.array(item.exponents, dtype=np.float64).reshape(n, 2)
    sums = sector_sums(
        lattice(points, n),
        points,
        shifts,
        *arrays(item.u),
        *arrays(item.f),
        *arrays(item.q),
        np.array(item.u_power),
        np.array(item.f_power),
        np.ascontiguousarray(lines[:, 1]),
        np.ascontiguousarray(lines[:, 0]),
        singular,
        terms,
    )
    factor = np.convolve(front.coefficients, item.series)[:terms]
    results = np.zeros((_SHIFTS, wanted))
    for s in range(_SHIFTS):
        results[s, missing:] = np.convolve(sums[s], factor)[:terms]
    variance = results.var(axis=0, ddof=1) / _SHIFTS
    return _Estimate(results.mean(axis=0), variance, points)
