"""One sector: from cones to integrands over the unit cube that need only logarithmic subtractions."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from ibpred.errors import InputError
from ibpred.numerics.direct.fan import Cone
from ibpred.numerics.direct.polynomial import (
    Terms,
    add,
    derivative,
    multiply,
    scaled,
    without,
)

Line = tuple[float, float]
"""A number ``a + b*eps``."""


@dataclass(frozen=True)
class Integrand:
    """``series(eps) * prod_j t_j^(a_j + b_j eps) * Q * U^u * F^f`` over the unit cube.

    Attributes
    ----------
    series
        Coefficients of the prefactor, a power series in eps.
    exponents
        (a_j, b_j) of each variable.
    q, u, f
        Polynomials in t; U and F are positive on the closed cube.
    u_power, f_power
        Powers of U and F.
    """

    series: tuple[float, ...]
    exponents: tuple[Line, ...]
    q: Terms
    u: Terms
    f: Terms
    u_power: Line
    f_power: Line


def on_cone(whole: Integrand, cone: Cone) -> Integrand:
    """An integrand over positive x modulo scaling, restricted to one cone.

    `whole` has powers ``x_i^(a_i + b_i eps)`` of the measure ``dx_i/x_i``, the last variable set to one;
    the result has ``t_j^(a_j + b_j eps)`` of the measure ``dt_j``.
    """
    rays = cone.rays
    shifts: dict[str, NDArray[np.int64]] = {}
    images: dict[str, Terms] = {}
    for name, terms in (("q", whole.q), ("u", whole.u), ("f", whole.f)):
        moved = np.array(list(terms), dtype=np.int64).reshape(len(terms), len(rays)) @ rays.T
        shifts[name] = moved.min(axis=0)
        image: Terms = {}
        for row, c in zip(moved - shifts[name], terms.values(), strict=True):
            key = tuple(int(e) for e in row)
            image[key] = image.get(key, 0.0) + c
        images[name] = image
    exponents = []
    for j, ray in enumerate(rays):
        line = np.array([-1.0, 0.0])
        for r, power in zip(ray, whole.exponents, strict=True):
            line += r * np.array(power)
        line += shifts["q"][j] * np.array([1.0, 0.0])
        line += shifts["u"][j] * np.array(whole.u_power) + shifts["f"][j] * np.array(whole.f_power)
        exponents.append((float(line[0]), float(line[1])))
    return _without_roots(
        Integrand(
            tuple(c * cone.volume for c in whole.series),
            tuple(exponents),
            images["q"],
            images["u"],
            images["f"],
            whole.u_power,
            whole.f_power,
        )
    )


def _without_roots(g: Integrand) -> Integrand:
    """Substitute t = s^2 where a half-integer power of t would spoil smoothness at zero."""
    doubled = [2 if abs(a - round(a)) > 1e-9 else 1 for a, _ in g.exponents]
    if max(doubled, default=1) == 1:
        return g

    def image(terms: Terms) -> Terms:
        return {tuple(x * k for x, k in zip(e, doubled, strict=True)): c for e, c in terms.items()}

    factor = 2 ** (sum(doubled) - len(doubled))
    exponents = tuple((k * (a + 1) - 1, k * b) for k, (a, b) in zip(doubled, g.exponents, strict=True))
    series = tuple(c * factor for c in g.series)
    return Integrand(series, exponents, image(g.q), image(g.u), image(g.f), g.u_power, g.f_power)


def logarithmic(integrands: Sequence[Integrand]) -> list[Integrand]:
    """Raise all exponents below -1 of a sum of integrands by integration by parts in t.

    ``int_0^1 t^(e-1) g dt = g(1)/e - 1/e int_0^1 t^e g' dt`` for e = a + 1 + b eps with a + 1 < 0. The same
    derivatives of Q, U and F taken in another order give the same powers, so parts are joined step by step:
    their number stays polynomial in the number of steps.

    Raises
    ------
    InputError
        If an exponent is -1 at eps and stays there: the integral is not regulated.
    """
    done: list[Integrand] = []
    left = _collected(_sharing(integrands))
    edges: dict[tuple[int, int], Terms] = {}
    while left:
        raised: list[Integrand] = []
        for part in left:
            j = _too_low(part)
            if j is None:
                done.append(part)
            else:
                raised += _raised(part, j, edges)
        left = _collected(raised)
    return _collected(done)


def _sharing(integrands: Sequence[Integrand]) -> list[Integrand]:
    """The same with one object for equal polynomials U and F."""
    known: dict[frozenset[tuple[tuple[int, ...], float]], Terms] = {}

    def one(terms: Terms) -> Terms:
        return known.setdefault(frozenset(terms.items()), terms)

    return [replace(item, u=one(item.u), f=one(item.f)) for item in integrands]


def _too_low(integrand: Integrand) -> int | None:
    """The first variable whose exponent must be raised."""
    for j, (a, b) in enumerate(integrand.exponents):
        if abs(a + 1) < 1e-9 and b == 0.0:
            raise InputError(
                "the integral has a divergence that dimensional regularisation does not regulate"
            )
        if a < -1 - 1e-9:
            return j
    return None


def _at_edge(terms: Terms, j: int, edges: dict[tuple[int, int], Terms]) -> Terms:
    """U or F at t_j = 1: one object for all parts that share it, so that these can be joined."""
    key = (id(terms), j)
    if key not in edges:
        edges[key] = without(terms, j, value=1)
    return edges[key]


def _raised(g: Integrand, j: int, edges: dict[tuple[int, int], Terms]) -> list[Integrand]:
    a, b = g.exponents[j]
    inverse = _divided(g.series, (a + 1, b))
    rest = (*g.exponents[:j], *g.exponents[j + 1 :])
    parts = []
    boundary = without(g.q, j, value=1)
    if boundary:
        u, f = _at_edge(g.u, j, edges), _at_edge(g.f, j, edges)
        parts.append(Integrand(inverse, rest, boundary, u, f, g.u_power, g.f_power))
    higher = (*g.exponents[:j], (a + 1, b), *g.exponents[j + 1 :])
    minus = tuple(-c for c in inverse)
    plain = derivative(g.q, j)
    if plain:
        parts.append(Integrand(minus, higher, plain, g.u, g.f, g.u_power, g.f_power))
    from_u = multiply(g.q, derivative(g.u, j))
    if from_u and g.u_power != (0.0, 0.0):
        series = _times(minus, g.u_power)
        power = (g.u_power[0] - 1, g.u_power[1])
        parts.append(Integrand(series, higher, from_u, g.u, g.f, power, g.f_power))
    from_f = multiply(g.q, derivative(g.f, j))
    if from_f and g.f_power != (0.0, 0.0):
        series = _times(minus, g.f_power)
        power = (g.f_power[0] - 1, g.f_power[1])
        parts.append(Integrand(series, higher, from_f, g.u, g.f, g.u_power, power))
    return [_factored(part) for part in parts]


def _factored(g: Integrand) -> Integrand:
    """Move a common monomial of Q into the exponents."""
    lowest = tuple(min(e[j] for e in g.q) for j in range(len(g.exponents)))
    if not any(lowest):
        return g
    q = {tuple(x - y for x, y in zip(e, lowest, strict=True)): c for e, c in g.q.items()}
    exponents = tuple((a + k, b) for (a, b), k in zip(g.exponents, lowest, strict=True))
    return Integrand(g.series, exponents, q, g.u, g.f, g.u_power, g.f_power)


def differentiated(integrands: Sequence[Integrand], i: int, order: int) -> list[Integrand]:
    """``(-d/dx_i)^order`` at x_i = 0: a line with power -order, its parameter dropped.

    The integrands are the terms of a sum, with the same objects U and F. It follows from
    ``x^(a-1)/Gamma(a)`` tending to the derivative of order -a of the delta function.
    """
    parts = list(integrands)
    u, f = parts[0].u, parts[0].f
    slopes = derivative(u, i), derivative(f, i)
    for _ in range(order):
        new = []
        for part in parts:
            minus = tuple(-c for c in part.series)
            for series, q, u_power, f_power in (
                (minus, derivative(part.q, i), part.u_power, part.f_power),
                (
                    _times(minus, part.u_power),
                    multiply(part.q, slopes[0]),
                    (part.u_power[0] - 1, part.u_power[1]),
                    part.f_power,
                ),
                (
                    _times(minus, part.f_power),
                    multiply(part.q, slopes[1]),
                    part.u_power,
                    (part.f_power[0] - 1, part.f_power[1]),
                ),
            ):
                if q and any(series):
                    new.append(Integrand(series, part.exponents, q, u, f, u_power, f_power))
        parts = _collected(new)
    edges = without(u, i, value=0), without(f, i, value=0)
    result = []
    for part in parts:
        rest = (*part.exponents[:i], *part.exponents[i + 1 :])
        q = without(part.q, i, value=0)
        if q:
            result.append(Integrand(part.series, rest, q, *edges, part.u_power, part.f_power))
    return _collected(result)


def _collected(parts: list[Integrand]) -> list[Integrand]:
    """Join parts that differ in Q and by a common number only; U and F are compared as objects."""
    found: dict[object, Integrand] = {}
    for part in parts:
        lead = next(k for k, c in enumerate(part.series) if c)
        unit = tuple(round(c / part.series[lead], 12) for c in part.series)
        key = (unit, part.exponents, part.u_power, part.f_power, id(part.u), id(part.f))
        if key in found:
            old = found[key]
            ratio = part.series[lead] / old.series[lead]
            q = add(old.q, scaled(part.q, ratio))
            found[key] = Integrand(old.series, old.exponents, q, old.u, old.f, old.u_power, old.f_power)
        else:
            found[key] = part
    return [part for part in found.values() if part.q]


def _times(series: tuple[float, ...], line: Line) -> tuple[float, ...]:
    a, b = line
    return tuple(a * c + b * (series[k - 1] if k else 0.0) for k, c in enumerate(series))


def _divided(series: tuple[float, ...], line: Line) -> tuple[float, ...]:
    a, b = line
    result: list[float] = []
    for k, c in enumerate(series):
        result.append((c - b * (result[k - 1] if k else 0.0)) / a)
    return tuple(result)
