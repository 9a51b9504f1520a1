"""Systems whose answer is known because they are made from it."""

from __future__ import annotations

from fractions import Fraction
from random import Random

from ibpred.epsform.form import Connection, Matrix
from ibpred.epsform.matrices import (
    added,
    derivative,
    identity,
    inverse,
    lifted,
    product,
    scaled,
    subtracted,
)
from ibpred.exact.grammar import parse_rational
from ibpred.exact.rational import Rational, ring

RING = ring(("eps", "x"))


def matrix(rows: list[list[str]]) -> Matrix:
    return tuple(tuple(parse_rational(text, RING) for text in row) for row in rows)


def connection(rows: Matrix, blocks: tuple[int, ...] | None = None) -> Connection:
    size = len(rows)
    return Connection(
        ("x",), RING, {"x": rows}, blocks or (1,) * size, tuple(f"I{i + 1}" for i in range(size))
    )


def canonical(letters: dict[str, list[list[int]]]) -> Matrix:
    """``eps sum_l A_l dlog(l)/dx``."""
    eps, total = RING.variable("eps"), None
    for text, numbers in letters.items():
        letter = parse_rational(text, RING)
        constants = lifted(RING, tuple(tuple(map(Fraction, row)) for row in numbers))
        term = scaled(constants, eps * letter.derivative("x") / letter)
        total = term if total is None else added(total, term)
    return total


def gauged(system: Matrix, change: Matrix) -> Matrix:
    """The system of ``I = S f`` from that of f: ``S B S^-1 + S' S^-1``."""
    whole = added(product(change, system, RING), derivative(change, "x"))
    return product(whole, inverse(change, RING), RING)


def random_entry(random: Random, points: list[int]) -> Rational:
    eps, x = RING.variable("eps"), RING.variable("x")
    top = random.choice([RING.one, eps, x, 1 + eps, 1 - 2 * eps, x + eps, 3 * x - 1])
    bottom = random.choice([RING.one, 1 + 2 * eps, 1 - 2 * eps, *(x - a for a in points)])
    return random.choice([1, 2, -1, -3]) * top / bottom


def unit(size: int) -> Matrix:
    return identity(RING, size)


def difference(left: Matrix, right: Matrix) -> Matrix:
    return subtracted(left, right)
