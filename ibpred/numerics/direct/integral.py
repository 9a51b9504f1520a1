"""Feynman-parameter integrals in the Euclidean region, to a few digits, with error estimates."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import factorial

import numpy as np
from numpy.typing import NDArray

from ibpred.errors import InputError
from ibpred.family.definition import FamilyDefinition
from ibpred.numerics.direct.fan import simplicial_fan
from ibpred.numerics.direct.graph import graph_polynomials
from ibpred.numerics.direct.lattice import lattice, prime_at_least
from ibpred.numerics.direct.polynomial import Exponents, Terms, scaled, without
from ibpred.numerics.direct.prefactor import Series, exponential, gamma_series
from ibpred.numerics.direct.sector import Integrand, differentiated, logarithmic, on_cone
from ibpred.progress import SILENT, Progress

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
    progress: Progress = SILENT,
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
    progress
        Told about every sector.

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
    parts, lines = _without_lines(scaled(u_terms, 1.0), scaled(f_terms, 1.0), powers, loops, dimension, order)
    if not parts:
        return {order: (0.0, 0.0)}
    total = sum(powers)
    length = len(parts[0].series)
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
        value, variance = _integrate(integrands, depth, front, wanted, seed, samples, progress)
    lowest = front.lowest - depth
    return {lowest + k: (float(value[k]), float(np.sqrt(variance[k]))) for k in range(wanted)}


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
    length = max(1, order + n + 3)
    series = (1.0,) + (0.0,) * (length - 1)
    exponents = tuple((float(max(power, 0)), 0.0) for power in powers)
    one = {(0,) * n: 1.0}
    u_power = (total - (loops + 1) * half, float(loops + 1))
    f_power = (-total + loops * half, -float(loops))
    parts = [Integrand(series, exponents, one, u, f, u_power, f_power)]
    for i in reversed(range(n)):
        if powers[i] <= 0:
            parts = differentiated(parts, i, -powers[i]) if parts else []
    for part in parts:
        for name, terms in (("U", part.u), ("F", part.f)):
            if not terms:
                raise InputError(f"{name} vanishes for these lines: the integral is scaleless")
            if min(terms.values()) < 0:
                raise InputError(f"{name} has negative terms: the point is outside the Euclidean region")
    return parts, sum(power > 0 for power in powers)


def _integrands(parts: list[Integrand], lines: int) -> list[Integrand]:
    """All sectors of all parts."""
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
    u_points = np.array(list(flat[0].u), dtype=np.int64).reshape(len(flat[0].u), last)
    f_points = np.array(list(flat[0].f), dtype=np.int64).reshape(len(flat[0].f), last)
    points = (u_points[:, None, :] + f_points[None, :, :]).reshape(len(u_points) * len(f_points), last)
    cones = simplicial_fan(points)
    used = [part for part in flat if part.q]
    return [item for cone in cones for item in logarithmic([on_cone(part, cone) for part in used])]


def _singular(item: Integrand) -> NDArray[np.int64]:
    return np.array([j for j, (a, _) in enumerate(item.exponents) if abs(a + 1) < 1e-9], dtype=np.int64)


def _depth(item: Integrand) -> int:
    return len(_singular(item))


def direct_value(
    family: FamilyDefinition,
    powers: Sequence[int],
    point: Mapping[str, Fraction | int],
    order: int,
    seed: int,
    samples: int,
    progress: Progress = SILENT,
) -> dict[int, tuple[float, float]]:
    """`direct_integral` for an integral of a family at a Euclidean point.

    Parameters
    ----------
    powers
        Of the family's lines, in their order.
    point
        Value of every invariant.

    Raises
    ------
    InputError
        See `direct_integral`; also for a wrong number of powers, missing or unknown invariants.
    """
    u, f = graph_polynomials(family, point)
    return direct_integral(u, f, powers, len(family.loops), family.dimension, order, seed, samples, progress)


@dataclass(frozen=True)
class _Estimate:
    value: NDArray[np.float64]
    variance: NDArray[np.float64]
    points: int


def _integrate(
    integrands: list[Integrand],
    depth: int,
    front: Series,
    wanted: int,
    seed: int,
    samples: int,
    progress: Progress,
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Sum of all integrands times the front factor, and its variance."""
    random = np.random.default_rng(seed)
    pilot = max(_FEWEST, int(samples * _PILOT / _SHIFTS))
    progress.stage("direct integration")
    first = []
    for k, item in enumerate(integrands):
        first.append(_lattice_sum(item, depth, front, wanted, pilot, random))
        progress.advance(k + 1, 2 * len(integrands))
    # the error falls about like 1/points: points in proportion to the square root of the errors
    spread = np.array([float(np.sqrt(item.variance[-1])) for item in first])
    share = np.sqrt(spread / spread.sum()) if spread.sum() > 0 else np.zeros(len(first))
    budget = samples * (1 - _PILOT) * len(first) / _SHIFTS
    value, variance = np.zeros(wanted), np.zeros(wanted)
    for k, (item, old, part) in enumerate(zip(integrands, first, share, strict=True)):
        points = int(budget * part / share.sum()) if share.sum() > 0 else 0
        best = old
        if points > 2 * old.points:
            best = _lattice_sum(item, depth, front, wanted, points, random)
        value += best.value
        variance += best.variance
        progress.advance(len(first) + k + 1, 2 * len(first))
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
