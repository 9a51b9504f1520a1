"""Polynomials with floating-point coefficients, as dictionaries from exponents to coefficients."""

from __future__ import annotations

from collections.abc import Mapping

Exponents = tuple[int, ...]
Terms = dict[Exponents, float]


def scaled(a: Mapping[Exponents, float], factor: float) -> Terms:
    """A polynomial times a number."""
    return {e: c * factor for e, c in a.items() if c * factor != 0.0}


def add(*parts: Mapping[Exponents, float]) -> Terms:
    """Sum; exact zeros are dropped."""
    total: Terms = {}
    for part in parts:
        for e, c in part.items():
            total[e] = total.get(e, 0.0) + c
    return {e: c for e, c in total.items() if c != 0.0}


def multiply(a: Mapping[Exponents, float], b: Mapping[Exponents, float]) -> Terms:
    """Product."""
    total: Terms = {}
    for e, c in a.items():
        for f, d in b.items():
            key = tuple(x + y for x, y in zip(e, f, strict=True))
            total[key] = total.get(key, 0.0) + c * d
    return {e: c for e, c in total.items() if c != 0.0}


def derivative(a: Mapping[Exponents, float], i: int) -> Terms:
    """Partial derivative in variable i."""
    return {(*e[:i], e[i] - 1, *e[i + 1 :]): c * e[i] for e, c in a.items() if e[i] > 0}


def without(a: Mapping[Exponents, float], i: int, *, value: int) -> Terms:
    """Variable i set to 0 or 1 and dropped."""
    total: Terms = {}
    for e, c in a.items():
        if value or e[i] == 0:
            key = (*e[:i], *e[i + 1 :])
            total[key] = total.get(key, 0.0) + c
    return {e: c for e, c in total.items() if c != 0.0}
