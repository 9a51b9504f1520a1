"""Vectorised arithmetic modulo one prime below 2^50, on numpy arrays of residues.

Products are exact: the low 64 bits come from wrapping integer multiplication, the quotient from
doubles, whose error is below one half for such primes, so that one correction either way suffices.
Matrix products go through doubles in limbs of 17 bits, exact as long as sums stay below 2^53.
"""

from __future__ import annotations

from collections.abc import Sequence
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

Residues = NDArray[np.uint64]

LARGEST_BITS = 50
SMALLEST_BITS = 40
"""Smaller primes would make accidental zeros and coincidences of random residues likely."""
_LIMB = 17
_LIMBS = 3
_COLUMNS = 1024
_LONGEST_SUM = 2**16


def multiply(a: Residues, b: Residues | int, prime: int) -> Residues:
    """Elementwise product modulo the prime (broadcasting)."""
    left = np.asarray(a, dtype=np.uint64)
    right = np.asarray(b, dtype=np.uint64)
    quotient = (left.astype(np.float64) * right.astype(np.float64) * (1.0 / prime)).astype(np.uint64)
    rest: NDArray[np.int64] = (left * right - quotient * np.uint64(prime)).view(np.int64)
    rest += np.where(rest < 0, np.int64(prime), np.int64(0))
    rest -= np.where(rest >= prime, np.int64(prime), np.int64(0))
    return rest.view(np.uint64)


def add(a: Residues, b: Residues | int, prime: int) -> Residues:
    """Elementwise sum modulo the prime."""
    total = np.asarray(a, dtype=np.uint64) + np.asarray(b, dtype=np.uint64)
    return total - np.where(total >= prime, np.uint64(prime), np.uint64(0))


def subtract(a: Residues, b: Residues, prime: int) -> Residues:
    """Elementwise difference modulo the prime."""
    return add(a, np.uint64(prime) - np.asarray(b, dtype=np.uint64), prime)


def invert(a: Residues, prime: int) -> Residues:
    """Elementwise inverse modulo the prime of nonzero residues."""
    flat = [pow(int(x), -1, prime) for x in np.ravel(a)]
    return np.array(flat, dtype=np.uint64).reshape(np.shape(a))


def power_table(a: Residues, highest: int, prime: int) -> Residues:
    """Powers ``a**0 .. a**highest``, shape (highest + 1, \\*a.shape)."""
    table = np.ones((highest + 1, *np.shape(a)), dtype=np.uint64)
    for k in range(1, highest + 1):
        table[k] = multiply(table[k - 1], a, prime)
    return table


def monomials(exponents: NDArray[np.int64], points: Residues, prime: int) -> Residues:
    """Monomials at points.

    Parameters
    ----------
    exponents
        (terms, variables), non-negative.
    points
        (variables, B).

    Returns
    -------
    array
        (terms, B).
    """
    result = np.ones((len(exponents), points.shape[1]), dtype=np.uint64)
    for i in range(exponents.shape[1]):
        column = exponents[:, i]
        highest = int(column.max(initial=0))
        if highest:
            result = multiply(result, power_table(points[i], highest, prime)[column], prime)
    return result


def matrix_product(a: Residues, b: Residues, prime: int) -> Residues:
    """Matrix product modulo the prime, (m, k) by (k, n)."""
    inner = a.shape[1]
    if inner > _LONGEST_SUM:
        half = inner // 2
        return add(
            matrix_product(a[:, :half], b[:half], prime), matrix_product(a[:, half:], b[half:], prime), prime
        )
    result = np.empty((a.shape[0], b.shape[1]), dtype=np.uint64)
    left = _limbs(a)
    for start in range(0, b.shape[1], _COLUMNS):
        right = _limbs(b[:, start : start + _COLUMNS])
        total = np.zeros((a.shape[0], right[0].shape[1]), dtype=np.uint64)
        for degree in range(2 * _LIMBS - 2, -1, -1):
            part = np.zeros(total.shape)
            for i in range(max(0, degree - _LIMBS + 1), min(degree, _LIMBS - 1) + 1):
                part += left[i] @ right[degree - i]
            total = multiply(total, 2**_LIMB, prime)
            total = add(total, part.astype(np.uint64) % np.uint64(prime), prime)
        result[:, start : start + _COLUMNS] = total
    return result


def _limbs(a: Residues) -> list[NDArray[np.float64]]:
    mask = np.uint64(2**_LIMB - 1)
    return [((a >> np.uint64(_LIMB * i)) & mask).astype(np.float64) for i in range(_LIMBS)]


def lagrange_coefficients(nodes: Residues, prime: int) -> Residues:
    """Coefficients of the Lagrange polynomials of distinct nodes.

    Returns
    -------
    array
        (K, K): row m holds the coefficients, by ascending degree, of the polynomial of degree
        K - 1 that is 1 at node m and 0 at the others. It is the inverse of the matrix
        ``V[j, m] = nodes[m]**j``.
    """
    return _lagrange_coefficients(nodes.tobytes(), prime).copy()


@lru_cache(maxsize=8)
def _lagrange_coefficients(raw: bytes, prime: int) -> Residues:
    nodes = np.frombuffer(raw, dtype=np.uint64)
    count = len(nodes)
    master = np.zeros(count + 1, dtype=np.uint64)
    master[0] = 1
    for k, node in enumerate(nodes):  # times (z - node)
        shifted = np.zeros_like(master)
        shifted[1 : k + 2] = master[: k + 1]
        master = subtract(shifted, multiply(master, node, prime), prime)
    rows = np.zeros((count, count), dtype=np.uint64)
    carry = np.zeros(count, dtype=np.uint64)
    value = np.zeros(count, dtype=np.uint64)
    for degree in range(count - 1, -1, -1):  # synthetic division of the master by every z - node
        carry = add(multiply(carry, nodes, prime), master[degree + 1], prime)
        rows[:, degree] = carry
        value = add(multiply(value, nodes, prime), carry, prime)
    return multiply(rows, invert(value, prime)[:, None], prime)


def interpolate(nodes: Residues, values: Residues, prime: int) -> Residues:
    """Coefficients by ascending degree, (rows, K), of the polynomials through (nodes, values).

    Parameters
    ----------
    nodes
        (K,), distinct.
    values
        (rows, K).
    """
    if not len(nodes):
        return values.copy()
    return matrix_product(values, lagrange_coefficients(nodes, prime), prime)


def residues(numbers: Sequence[int], prime: int) -> Residues:
    """Integers of any size as residues."""
    return np.array([n % prime for n in numbers], dtype=np.uint64)
