"""Evaluation of a table of integer polynomials, one sample point in each lane."""

from __future__ import annotations

from typing import Any

from numba import njit

from ibpred.kernels.lanes import (
    BIAS,
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


@njit(cache=True, nogil=True)
def lanes_monomials(blocks: Any, products: Any, p: float) -> None:
    """Blocks ``target = left * right`` modulo p, in order; products is int32 (n, 3)."""
    minus_p, inverse_p = spread(-p), spread(1.0 / p)
    for i in range(products.shape[0]):
        left = load(blocks, products[i, 1])
        right = load(blocks, products[i, 2])
        store(blocks, products[i, 0], lanes_multiply(left, right, minus_p, inverse_p))


@njit(cache=True, nogil=True)
def lanes_polynomials(
    blocks: Any, start: Any, monomial: Any, factor: Any, target: Any, first: int, p: float
) -> None:
    """Blocks ``target[first + c] = sum_e factor_e * blocks[monomial_e]`` modulo p.

    start, monomial, factor: the polynomials in CSR form, factors as float64 residues.
    """
    minus_p, inverse_p = spread(-p), spread(1.0 / p)
    for c in range(start.shape[0] - 1):
        high = spread(BIAS)
        low = spread(0.0)
        left = LONGEST_SUM
        for e in range(start[c], start[c + 1]):
            if left == 0:
                low = lanes_settle(high, low, minus_p, inverse_p)
                high = spread(BIAS)
                left = LONGEST_SUM
            x = spread(factor[e])
            y = load(blocks, monomial[e])
            sum_ = fma(x, y, high)
            low = add(low, fma(x, y, sub(high, sum_)))
            high = sum_
            left -= 1
        store(target, first + c, lanes_settle(high, low, minus_p, inverse_p))
