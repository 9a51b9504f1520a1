from __future__ import annotations

import numpy as np
import pytest
from numba import njit

from ibpred.elimination.table import aligned_blocks
from ibpred.exact.primes import first_primes
from ibpred.kernels.lanes import (
    ALIGNMENT,
    BIAS,
    LANES,
    LONGEST_SUM,
    add,
    fma,
    lanes_multiply,
    lanes_settle,
    load,
    spread,
    store,
    sub,
)
from ibpred.kernels.replay import lanes_invert

PRIMES = (3, 101, 2**31 - 1, *first_primes(2))


@njit
def _sum(blocks, terms, scaled, p):  # type: ignore[no-untyped-def]
    minus_p, inverse_p = spread(-p), spread(1.0 / p)
    high = spread(BIAS)
    low = load(blocks, 0)
    for k in range(1, terms):
        x, y = load(blocks, 2 * k), load(blocks, 2 * k + 1)
        s = fma(x, y, high)
        low = add(low, fma(x, y, sub(high, s)))
        high = s
    result = lanes_settle(high, low, minus_p, inverse_p)
    if scaled:
        result = lanes_multiply(result, load(blocks, 1), minus_p, inverse_p)
    store(blocks, 0, result)


@pytest.mark.parametrize("prime", PRIMES)
@pytest.mark.parametrize("scaled", [False, True])
def test_longest_sum_of_largest_products_is_exact(prime: int, scaled: bool) -> None:
    most = int(0.55 * prime)
    rng = np.random.default_rng(0)
    for trial in range(6):
        blocks = aligned_blocks(2 * LONGEST_SUM)
        assert blocks.ctypes.data % ALIGNMENT == 0
        values = rng.integers(-most, most + 1, (2 * LONGEST_SUM, LANES))
        if trial < 4:
            values[2:] = most if trial % 2 else np.where(np.arange(LANES) % 2, most, -most)
            values[2::2] = -most if trial >= 2 else most
            values[:2] = most
        blocks[:] = values.reshape(-1)
        _sum(blocks, LONGEST_SUM, scaled, float(prime))
        for lane in range(LANES):
            v = [int(x) for x in values[:, lane]]
            want = v[0] + sum(v[2 * k] * v[2 * k + 1] for k in range(1, LONGEST_SUM))
            if scaled:
                want *= v[1]
            assert int(blocks[lane]) % prime == want % prime
        assert np.abs(blocks[:LANES]).max() <= 0.55 * prime + 1


@pytest.mark.parametrize("prime", PRIMES)
def test_batch_of_inverses(prime: int) -> None:
    count = 5
    blocks = aligned_blocks(2 * count)
    rng = np.random.default_rng(1)
    values = rng.integers(1, prime, (count, LANES))
    values[3, 7] = 0
    values -= np.where(values > prime // 2, prime, 0)
    blocks[: count * LANES] = values.reshape(-1)
    good = np.ones(LANES, np.bool_)
    source = np.arange(count, dtype=np.int32)
    lanes_invert(blocks, source, source + count, 0, count, good, float(prime))
    assert good.tolist() == [lane != 7 for lane in range(LANES)]
    result = blocks[count * LANES :].reshape(count, LANES)
    for lane in range(LANES):
        if lane != 7:
            for i in range(count):
                assert int(result[i, lane]) * int(values[i, lane]) % prime == prime - 1
