from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numba import njit

from ibpred.exact.primes import first_primes
from ibpred.kernels.arithmetic import from_residues, invert, leading_zeros, multiply, to_residues
from ibpred.kernels.columns import empty_columns, insert, largest, remove
from ibpred.kernels.memory import pointer

PRIMES = (3, 5, 251, 65521, 2**31 - 1, first_primes(1, bits=40)[0], *first_primes(2))


@njit
def _products(x, y, p):  # type: ignore[no-untyped-def]
    result = np.empty(len(x))
    for i in range(len(x)):
        result[i] = multiply(x[i], y[i], p, 1.0 / p)
    return result


@pytest.mark.parametrize("prime", PRIMES)
def test_products_are_exact_and_small(prime: int) -> None:
    rng = np.random.default_rng(prime % 1000)
    extreme = [0, 1, -1, prime // 2, -(prime // 2), prime // 2 - 1, int(0.55 * prime), -int(0.55 * prime)]
    x = np.concatenate([np.repeat(extreme, 8), rng.integers(-(prime // 2), prime // 2 + 1, 2000)])
    y = np.concatenate([np.tile(extreme, 8), rng.integers(-(prime // 2), prime // 2 + 1, 2000)])
    got = _products(x.astype(float), y.astype(float), float(prime))
    assert all(int(r) % prime == int(a) * int(b) % prime for r, a, b in zip(got, x, y, strict=True))
    assert np.abs(got).max() <= 0.55 * prime + 1


@pytest.mark.parametrize("prime", PRIMES)
def test_inverses(prime: int) -> None:
    values = [v for v in (1, -1, 2, prime // 2, -(prime // 2), 12345, -777) if v % prime]
    for v in values:
        inverse = int(invert(float(v), float(prime)))
        assert inverse * v % prime == 1
        assert 2 * abs(inverse) <= prime


@given(st.lists(st.integers(-(2**63), 2**63 - 1), min_size=1), st.sampled_from(PRIMES))
@settings(deadline=None)
def test_residues_of_any_integer(values: list[int], prime: int) -> None:
    balanced = to_residues(np.array(values, np.int64), prime)
    assert np.all(np.abs(balanced) <= prime / 2)
    assert from_residues(balanced, prime).tolist() == [v % prime for v in values]


@njit
def _change(bottom, middle, top, changes):  # type: ignore[no-untyped-def]
    b, m, t = pointer(bottom), pointer(middle), pointer(top)
    for c in changes:
        if c >= 0:
            insert(b, m, t, c)
        else:
            remove(b, m, t, -1 - c)


@njit
def _largest(bottom, middle, top, below):  # type: ignore[no-untyped-def]
    return largest(pointer(bottom), pointer(middle), pointer(top), below)


@njit
def _zeros(word):  # type: ignore[no-untyped-def]
    return leading_zeros(word)


def test_leading_zeros() -> None:
    for bit in range(64):
        assert _zeros(np.uint64((1 << bit) + (1 << bit) // 3)) == 63 - bit


def test_set_of_columns_gives_its_largest() -> None:
    columns = 1_000_000
    rng = np.random.default_rng(7)
    levels = empty_columns(columns)
    members: set[int] = set()
    for _ in range(300):
        changes = []
        for c in rng.integers(0, columns, 5).tolist():
            if c in members:
                members.remove(c)
                changes.append(-1 - c)
            else:
                members.add(c)
                changes.append(c)
        most = max(members, default=-1)
        if most >= 0 and rng.random() < 0.3:
            members.remove(most)
            changes.append(-1 - most)
        _change(*levels, np.array(changes, np.int64))
        assert _largest(*levels, columns - 1) == max(members, default=-1)
    while members:
        most = max(members)
        assert _largest(*levels, most) == most
        members.remove(most)
        _change(*levels, np.array([-1 - most], np.int64))
    assert _largest(*levels, columns - 1) == -1
