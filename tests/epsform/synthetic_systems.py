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


def scrambled(
    random: Random, sizes: list[int], points: list[int], density: float = 0.5
) -> tuple[Connection, Matrix]:
    """A random canonical system in a random basis, and the canonical matrix.

    Diagonal blocks have residues of rank one (so that monodromy does not commute), couplings are random;
    the change of basis is rational in x and eps, triangular between blocks and general inside them.
    """
    size = sum(sizes)
    starts = [sum(sizes[:k]) for k in range(len(sizes))]
    owner = [k for k, count in enumerate(sizes) for _ in range(count)]
    letters: dict[str, list[list[int]]] = {}
    for point in points:
        numbers = [[0] * size for _ in range(size)]
        for i in range(size):
            for j in range(size):
                if owner[j] < owner[i] and random.random() < density:
                    numbers[i][j] = random.randint(-3, 3)
        for start, count in zip(starts, sizes, strict=True):
            left = [random.randint(-2, 2) for _ in range(count)]
            right = [random.randint(-2, 2) for _ in range(count)]
            for i in range(count):
                for j in range(count):
                    numbers[start + i][start + j] = left[i] * right[j]
        letters[f"x-{point}" if point >= 0 else f"x+{-point}"] = numbers
    eps, x = RING.variable("eps"), RING.variable("x")
    diagonal = [RING.one, eps, 1 / eps, x - points[0], 1 / (x - points[0]), 1 - 2 * eps, 1 / (1 - 3 * eps)]
    change = tuple(
        tuple(
            random.choice(diagonal)
            if i == j
            else random_entry(random, points)
            if owner[j] < owner[i] and random.random() < density
            else RING.zero
            for j in range(size)
        )
        for i in range(size)
    )
    for start, count in zip(starts, sizes, strict=True):
        for _ in range(count if count > 1 else 0):
            step = [list(row) for row in unit(size)]
            i, j = random.sample(range(count), 2)
            step[start + i][start + j] = random_entry(random, points)
            change = product(change, tuple(map(tuple, step)), RING)
    system = canonical(letters)
    return connection(gauged(system, change), tuple(sizes)), system
