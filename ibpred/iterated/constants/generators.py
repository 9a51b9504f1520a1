"""Generators of the exact constants and monomials in them.

The square roots I and sqrt3 are algebraic, the others are conjectured to be algebraically independent.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import flint

from ibpred.balls.context import Ball, precision
from ibpred.iterated.constants.halves import multiple_zeta_ball, nested_sum_at_half
from ibpred.iterated.constants.sixth_roots import clausen_at_third, log_sine_at_two_thirds

Monomial = tuple[int, ...]
"""Exponents of the generators, in the order of `GENERATORS`."""


@dataclass(frozen=True)
class Generator:
    """One transcendental constant, or a square root.

    Attributes
    ----------
    name, weight, latex
        Its name, weight and LaTeX.
    ball
        Its value at given bits.
    odd
        Whether it is, but for the factor I, the imaginary part of an iterated integral.
    square
        Of a square root; None for transcendental constants.
    """

    name: str
    weight: int
    latex: str
    ball: Callable[[int], Any]
    odd: bool = False
    square: int | None = None


AT_HALF = {"li4half": (4,), "li5half": (5,), "li6half": (6,), "li51half": (5, 1)}
"""Generators that are nested sums ``sum_(n > m) 2^-n / (n^s m^r)`` at 1/2, with their indices."""


def _half(name: str) -> Callable[[int], Any]:
    return lambda bits: nested_sum_at_half(AT_HALF[name], bits)


def _zeta(n: int) -> Callable[[int], Any]:
    return lambda bits: flint.arb(n).zeta()


def _log(n: int) -> Callable[[int], Any]:
    return lambda bits: flint.arb(n).log()


GENERATORS: tuple[Generator, ...] = (
    Generator("I", 0, r"\mathrm{i}", lambda bits: flint.acb(0, 1), odd=True, square=-1),
    Generator("sqrt3", 0, r"\sqrt{3}", lambda bits: flint.arb(3).sqrt(), odd=True, square=3),
    Generator("pi", 1, r"\pi", lambda bits: flint.arb.pi(), odd=True),
    Generator("log2", 1, r"\log 2", _log(2)),
    Generator("log3", 1, r"\log 3", _log(3)),
    Generator(
        "clausen2",
        2,
        r"\mathrm{Cl}_2(\tfrac{\pi}{3})",
        lambda bits: clausen_at_third(2, bits),
        odd=True,
    ),
    Generator("zeta3", 3, r"\zeta_3", _zeta(3)),
    Generator(
        "logsine3",
        3,
        r"\mathrm{Ls}_3(\tfrac{2\pi}{3})",
        lambda bits: log_sine_at_two_thirds(3, bits),
        odd=True,
    ),
    Generator("li4half", 4, r"\mathrm{Li}_4(\tfrac12)", _half("li4half")),
    Generator(
        "clausen4",
        4,
        r"\mathrm{Cl}_4(\tfrac{\pi}{3})",
        lambda bits: clausen_at_third(4, bits),
        odd=True,
    ),
    Generator(
        "logsine4",
        4,
        r"\mathrm{Ls}_4(\tfrac{2\pi}{3})",
        lambda bits: log_sine_at_two_thirds(4, bits),
        odd=True,
    ),
    Generator("zeta5", 5, r"\zeta_5", _zeta(5)),
    Generator("li5half", 5, r"\mathrm{Li}_5(\tfrac12)", _half("li5half")),
    Generator("li6half", 6, r"\mathrm{Li}_6(\tfrac12)", _half("li6half")),
    Generator("li51half", 6, r"\mathrm{Li}_{5,1}(\tfrac12)", _half("li51half")),
    Generator("zeta7", 7, r"\zeta_7", _zeta(7)),
    Generator("zeta53", 8, r"\zeta_{5,3}", lambda bits: multiple_zeta_ball((5, 3), bits)),
    Generator("zeta9", 9, r"\zeta_9", _zeta(9)),
    Generator("zeta11", 11, r"\zeta_{11}", _zeta(11)),
)
"""By weight; ``zeta53`` is zeta(5,3) = sum_{n>m} n^-5 m^-3, ``clausen`` and ``logsine`` see `sixth_roots`."""

NAMES = tuple(g.name for g in GENERATORS)
_WEIGHTS = tuple(g.weight for g in GENERATORS)
SQUARES = tuple((i, g.square) for i, g in enumerate(GENERATORS) if g.square is not None)
"""Place and square of each square root."""
UNIT_MONOMIAL: Monomial = (0,) * len(NAMES)
"""One."""


@lru_cache(maxsize=512)
def generator_ball(index: int, bits: int) -> Ball:
    """The value of a generator as a complex ball."""
    with precision(bits):
        return flint.acb(GENERATORS[index].ball(bits))


def monomial_weight(monomial: Monomial) -> int:
    """Transcendental weight of a monomial."""
    return sum(w * e for w, e in zip(_WEIGHTS, monomial, strict=True))


def is_odd(monomial: Monomial) -> bool:
    """Whether a monomial is, but for a factor I, the imaginary part of an iterated integral."""
    return sum(e for g, e in zip(GENERATORS, monomial, strict=True) if g.odd) % 2 == 1


def multiply_monomials(left: Monomial, right: Monomial) -> tuple[int, Monomial]:
    """Product of two monomials as (factor, monomial), squares of square roots taken out."""
    total = [a + b for a, b in zip(left, right, strict=True)]
    factor = 1
    for place, square in SQUARES:
        factor *= square ** (total[place] // 2)
        total[place] %= 2
    return factor, tuple(total)


def generator_monomial(**powers: int) -> Monomial:
    """The monomial with the given powers of generators, e.g. ``generator_monomial(pi=2, zeta3=1)``."""
    exponents = [0] * len(NAMES)
    for name, power in powers.items():
        exponents[NAMES.index(name)] = power
    return tuple(exponents)


def monomials_of_weight(weight: int, steps: Mapping[str, int]) -> tuple[Monomial, ...]:
    """All monomials of one weight in the named generators.

    Parameters
    ----------
    weight
        The weight.
    steps
        For each generator allowed, the step of its exponents: ``{"pi": 2}`` allows even powers of pi.
        Square roots occur to the first power at most.
    """
    found: list[Monomial] = [UNIT_MONOMIAL] if weight >= 0 else []
    for name, step in steps.items():
        index = NAMES.index(name)
        unit = _WEIGHTS[index] * step
        grown: list[Monomial] = []
        for monomial in found:
            left = weight - monomial_weight(monomial)
            for count in range(left // unit + 1 if unit else 2):
                exponents = list(monomial)
                exponents[index] = count * step
                grown.append(tuple(exponents))
        found = grown
    return tuple(sorted((m for m in found if monomial_weight(m) == weight), reverse=True))
