"""Replay of a recorded elimination for `LANES` sample points at once."""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from ibpred.kernels.coefficients import lanes_monomials, lanes_polynomials
from ibpred.kernels.lanes import (
    BIAS,
    LANES,
    add,
    fma,
    lanes_multiply,
    lanes_settle,
    load,
    spread,
    store,
    sub,
)


@njit(cache=True, nogil=True)
def lanes_invert(blocks: Any, source: Any, target: Any, begin: int, end: int, good: Any, p: float) -> None:
    """Blocks ``target_i = -1/source_i`` modulo p for a batch of blocks.

    One inversion (a power, by Fermat) serves the whole batch; a lane where one source vanishes gives
    zeros and is marked in `good`.
    """
    minus_p, inverse_p = spread(-p), spread(1.0 / p)
    product = spread(1.0)
    for i in range(begin, end):
        store(blocks, target[i], product)
        product = lanes_multiply(product, load(blocks, source[i]), minus_p, inverse_p)
    exponent = np.int64(p) - 2
    inverse = spread(1.0)
    for bit in range(49, -1, -1):
        inverse = lanes_multiply(inverse, inverse, minus_p, inverse_p)
        if (exponent >> bit) & 1:
            inverse = lanes_multiply(inverse, product, minus_p, inverse_p)
    for i in range(end - 1, begin - 1, -1):
        before = load(blocks, target[i])
        if i == begin:
            # the first block still holds one: use it to look at the product
            store(blocks, target[i], product)
            for lane in range(LANES):
                if blocks[target[i] * LANES + lane] == 0.0:
                    good[lane] = False
        result = lanes_multiply(inverse, before, minus_p, inverse_p)
        inverse = lanes_multiply(inverse, load(blocks, source[i]), minus_p, inverse_p)
        store(blocks, target[i], sub(spread(-0.0), result))


@njit(cache=True, nogil=True)
def lanes_replay(
    blocks: Any,
    level_start: Any,
    target: Any,
    scale: Any,
    unit_start: Any,
    unit: Any,
    product_start: Any,
    product: Any,
    batch_start: Any,
    source: Any,
    inverse_target: Any,
    good: Any,
    p: float,
) -> None:
    """Run a tape on blocks that hold the inputs.

    Level l first inverts the batch ``batch_start[l]:batch_start[l+1]``, then forms the sums
    ``level_start[l]:level_start[l+1]``: ``scale * (sum of units + sum of products)``.
    """
    minus_p, inverse_p = spread(-p), spread(1.0 / p)
    for level in range(level_start.shape[0] - 1):
        if batch_start[level + 1] > batch_start[level]:
            lanes_invert(blocks, source, inverse_target, batch_start[level], batch_start[level + 1], good, p)
        for k in range(level_start[level], level_start[level + 1]):
            high = spread(BIAS)
            low = spread(0.0)
            for e in range(unit_start[k], unit_start[k + 1]):
                low = add(low, load(blocks, unit[e]))
            for e in range(product_start[k], product_start[k + 1]):
                x = load(blocks, product[e, 0])
                y = load(blocks, product[e, 1])
                sum_ = fma(x, y, high)
                low = add(low, fma(x, y, sub(high, sum_)))
                high = sum_
            result = lanes_settle(high, low, minus_p, inverse_p)
            if scale[k] >= 0:
                result = lanes_multiply(result, load(blocks, scale[k]), minus_p, inverse_p)
            store(blocks, target[k], result)


@njit(cache=True, nogil=True)
def collect(blocks: Any, output_slot: Any, values: Any, first: int, width: int, p: float) -> None:
    """Canonical residues of the outputs, into columns ``first:first + width`` of `values`."""
    for k in range(output_slot.shape[0]):
        slot = output_slot[k]
        for lane in range(width):
            x = 1.0
            if slot >= 0:
                x = blocks[slot * LANES + lane]
            if x < 0.0:
                x += p
            values[k, first + lane] = np.uint64(np.int64(x))


@njit(cache=True, nogil=True)
def replay_batches(
    points: Any,
    scratch: Any,
    blocks: Any,
    monomial_products: Any,
    input_start: Any,
    input_monomial: Any,
    input_factor: Any,
    level_start: Any,
    target: Any,
    scale: Any,
    unit_start: Any,
    unit: Any,
    product_start: Any,
    product: Any,
    batch_start: Any,
    source: Any,
    inverse_target: Any,
    output_slot: Any,
    values: Any,
    good: Any,
    p: float,
) -> None:
    """Replay a tape at all points (variables, B), `LANES` at once; fill `values` and `good`."""
    variables, count = points.shape
    lane_good = np.empty(LANES, np.bool_)
    for first in range(0, count, LANES):
        width = min(LANES, count - first)
        for lane in range(LANES):
            # spare lanes repeat the last point
            at = first + min(lane, width - 1)
            for v in range(variables):
                scratch[v * LANES + lane] = points[v, at]
            scratch[variables * LANES + lane] = 1.0
            lane_good[lane] = True
        lanes_monomials(scratch, monomial_products, p)
        lanes_polynomials(scratch, input_start, input_monomial, input_factor, blocks, 0, p)
        lanes_replay(
            blocks,
            level_start,
            target,
            scale,
            unit_start,
            unit,
            product_start,
            product,
            batch_start,
            source,
            inverse_target,
            lane_good,
            p,
        )
        collect(blocks, output_slot, values, first, width, p)
        for lane in range(width):
            good[first + lane] = lane_good[lane]
