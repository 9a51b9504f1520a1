"""Values of solutions at positive ratios, from polylogarithms summed as balls.

This is a route of its own to numbers: it shares with the continuation of the differential equation only the
boundary constants.
"""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction

import flint

from ibpred.balls.accuracy import bits_for, until_accurate
from ibpred.balls.context import Ball, precision
from ibpred.errors import InputError, PointError
from ibpred.iterated.constants.constants import Constant
from ibpred.iterated.polylogs.polylog_values import Place, polylog_balls
from ibpred.iterated.solution import Level, Solution
from ibpred.iterated.words import Word

_BITS_PER_DIGIT = 12


def solution_values(
    solution: Solution, point: Mapping[str, Fraction], digits: int
) -> tuple[tuple[Ball, ...], ...]:
    """Values of the canonical functions at positive ratios: ``values[k][i]`` at ``eps^(start + k)``.

    Letters that the path of a ratio meets are passed on one side, all on the same; inside the Euclidean
    region the functions are regular there, so the side does not matter for them (it does for single
    polylogarithms).

    Parameters
    ----------
    solution
        The solution.
    point
        A positive value for each ratio.
    digits
        Digits wanted of each value.

    Raises
    ------
    InputError
        If a letter is not linear in its ratio.
    PointError
        If a ratio is missing or not positive, or a letter vanishes at the point.
    PrecisionError
        If the digits cannot be reached.
    """
    for level in solution.levels:
        if point.get(level.variable, Fraction(0)) <= 0:
            raise PointError(f"a positive value of {level.variable} is needed")
    places = [_places(level, point) for level in solution.levels]
    words: list[list[Word]] = [
        sorted(
            {key[d] for order in solution.orders for f in order for key, _ in f}, key=lambda w: (len(w), w)
        )
        for d in range(len(solution.levels))
    ]

    def compute(bits: int) -> tuple[tuple[Ball, ...], ...]:
        tables = []
        for level, chosen, letters in zip(solution.levels, words, places, strict=True):
            end = Place(point[level.variable])
            tables.append(dict(zip(chosen, polylog_balls(chosen, letters, end, bits), strict=True)))
        cache: dict[Constant, Ball] = {}
        with precision(bits):
            found = []
            for order in solution.orders:
                row = []
                for function in order:
                    total = flint.acb(0)
                    for key, constant in function:
                        if constant not in cache:
                            cache[constant] = constant.ball(bits)
                        term = cache[constant]
                        for table, word in zip(tables, key, strict=True):
                            term = term * table[word]
                        total += term
                    row.append(total)
                found.append(tuple(row))
            return tuple(found)

    return until_accurate(
        compute,
        lambda rows: [value for row in rows for value in row],
        digits,
        bits_for(digits) + 60,
        _BITS_PER_DIGIT * digits + 2000,
    )


def _places(level: Level, point: Mapping[str, Fraction]) -> tuple[Place, ...]:
    found = []
    end = point[level.variable]
    for letter, root in zip(level.letters, level.roots(), strict=True):
        if root is None:
            raise InputError(f"the letter {letter} is not linear in {level.variable}: no polylogarithm of it")
        value = root.substitute({n: point[n] for n in root.variables()}).to_fraction()
        if value == end:
            raise PointError(f"the letter {letter} vanishes at the point")
        found.append(Place(value, Fraction(0), 1 if 0 < value < end else 0))
    if len({p.real for p in found}) < len(found):
        raise PointError(f"two letters in {level.variable} coincide at the point")
    return tuple(found)
