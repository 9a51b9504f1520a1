"""Nested sums ``Li_(s1..sk)(y1..yk) = sum_(n1 > ... > nk > 0) prod y_i^n_i / n_i^s_i`` and their products.

With ``y1 = x/a1`` and ``y_i = a_(i-1)/a_i`` such a sum is ``(-1)^k G(0^(s1-1), a1, ..., 0^(sk-1), ak; x)``.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any, TypeVar

Y = TypeVar("Y")

Indices = tuple[tuple[int, Y], ...]
"""(s, y) for each summation, the outermost first."""


def quasi_shuffle(left: Indices[Y], right: Indices[Y]) -> dict[Indices[Y], int]:
    """Product of two nested sums (stuffle product; Hoffman, J. Algebraic Combin. 11 (2000) 49).

    Interleavings, and contractions ``(s, y)(s', y') -> (s + s', y y')`` where two indices coincide.

    Parameters
    ----------
    left, right
        Arguments of any kind that multiplies: numbers or rational functions.
    """
    if not left or not right:
        return {left + right: 1}
    total: dict[Indices[Y], int] = {}
    one: Any = left[0][1]
    merged = (left[0][0] + right[0][0], one * right[0][1])
    for first, rest in (
        (left[0], quasi_shuffle(left[1:], right)),
        (right[0], quasi_shuffle(left, right[1:])),
        (merged, quasi_shuffle(left[1:], right[1:])),
    ):
        for key, count in rest.items():
            total[first, *key] = total.get((first, *key), 0) + count
    return total


def sum_of_polylog(arguments: Sequence[Y], x: Y) -> tuple[int, Indices[Y]]:
    """``G(arguments; x) = sign * Li``: the sign and the indices of the sum.

    Parameters
    ----------
    arguments
        The last one must not be zero (split off trailing zeros first).
    x
        The end point.

    Raises
    ------
    ValueError
        If the last argument is zero.
    """
    if arguments and not arguments[-1]:
        raise ValueError("a polylogarithm with trailing zeros is no nested sum")
    found: list[tuple[int, Y]] = []
    run = 1
    last: Any = x
    for a in arguments:
        if not a:
            run += 1
        else:
            found.append((run, last / a))
            run, last = 1, a
    return (-1) ** len(found), tuple(found)


def polylog_of_sum(indices: Indices[Y], x: Y, zero: Y) -> tuple[int, tuple[Y, ...]]:
    """``Li(indices) = sign * G(arguments; x)``; inverse of `sum_of_polylog`."""
    arguments: list[Y] = []
    last: Any = x
    for s, y in indices:
        last = last / y
        arguments += [zero] * (s - 1) + [last]
    return (-1) ** len(indices), tuple(arguments)
