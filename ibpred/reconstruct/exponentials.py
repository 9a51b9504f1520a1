"""Coefficients of sums of exponentials ``y_j = sum_m c_m v_m**j`` with known nodes v_m, modulo a prime.

The generating function of the sequence is ``N(z) / M(z)`` with ``M = prod (1 - v_m z)`` and
``deg N < deg M``, so that ``c_m = -v_m N(1/v_m) / M'(1/v_m)``: one product of polynomials and one
evaluation at all nodes for each sequence, in memory that grows linearly (transposed Vandermonde
systems: Kaltofen, Lakshman, ISSAC 1988). Coefficients of ``Y M`` beyond ``deg N`` must vanish: these
conditions give values that are missing, and check the rest.
"""

from __future__ import annotations

import flint
import numpy as np
from numpy.typing import NDArray

from ibpred.reconstruct.modular import Residues, invert, lagrange_coefficients, matrix_product, multiply
from ibpred.reconstruct.sampling import UnluckyPrimeError
from ibpred.reconstruct.univariate import ModularPolynomial, polynomial

_MANY_ROWS = 48  # from here on one matrix for all of them is faster, if it is not too large
_LARGE_MATRIX = 2048
_FAST_EVALUATION = 12_000  # nodes from which the subproduct tree beats Horner's rule


def exponential_coefficients(
    values: Residues, good: NDArray[np.bool_], nodes: Residues, prime: int
) -> tuple[Residues, NDArray[np.bool_]]:
    """Coefficients of several sequences with the same nodes.

    Parameters
    ----------
    values
        (rows, K): the sequences, K at least the number of nodes; missing where not good.
    good
        (K,); at least as many as there are nodes.
    nodes
        Distinct, not zero.

    Returns
    -------
    coefficients, fits
        (rows, nodes), and for each row whether the good values beyond the unknowns agree.

    Raises
    ------
    ValueError
        If there are fewer values than nodes.
    UnluckyPrimeError
        If the missing values are not determined.
    """
    count, length = len(nodes), values.shape[1]
    if int(good.sum()) < count:
        raise ValueError(f"{int(good.sum())} values do not determine {count} coefficients")
    if not count:
        return np.zeros((len(values), 0), dtype=np.uint64), ~(values[:, good] != 0).any(axis=1)
    master = _product([polynomial([1, prime - int(node)], prime) for node in nodes])
    gaps = [int(j) for j in np.nonzero(~good)[0]]
    filled = values.copy()
    filled[:, gaps] = 0
    conditions = _conditions(filled, master, count, prime)
    if gaps:
        filled[:, gaps] = _missing(conditions, master, count, gaps, prime, length)
        conditions = _conditions(filled, master, count, prime)
    fits = np.array([not any(row[count:length]) for row in conditions], dtype=np.bool_)
    if len(values) >= _MANY_ROWS and count <= _LARGE_MATRIX:
        found = matrix_product(filled[:, :count], lagrange_coefficients(nodes, prime).T, prime)
        return found, fits
    inverse = invert(nodes, prime)
    slopes = _evaluated(master.derivative(), inverse, prime)
    weights = multiply(prime - nodes, invert(slopes, prime), prime)
    found = np.zeros((len(values), count), dtype=np.uint64)
    for r, row in enumerate(conditions):
        found[r] = multiply(_evaluated(polynomial(row[:count], prime), inverse, prime), weights, prime)
    return found, fits


def _product(factors: list[ModularPolynomial]) -> ModularPolynomial:
    while len(factors) > 1:
        pairs = [a * b for a, b in zip(factors[::2], factors[1::2], strict=False)]
        factors = pairs + (factors[-1:] if len(factors) % 2 else [])
    return factors[0]


def _conditions(values: Residues, master: ModularPolynomial, count: int, prime: int) -> list[list[int]]:
    """Coefficients of ``Y M`` as far as the sequence determines them; those from `count` on must vanish."""
    length = values.shape[1]
    found = []
    for row in values:
        product = polynomial(row.tolist(), prime) * master
        coefficients = [int(c) for c in product.coeffs()[:length]]
        found.append(coefficients + [0] * (length - len(coefficients)))
    return found


def _missing(
    conditions: list[list[int]],
    master: ModularPolynomial,
    count: int,
    gaps: list[int],
    prime: int,
    length: int,
) -> Residues:
    """Values at the gaps from as many of the conditions."""
    # a gap beyond the nodes is given by its own condition; the others share those that are left
    own = [b for b in gaps if b >= count]
    free = [j for j in range(count, length) if j not in own][: len(gaps) - len(own)]
    chosen = own + free
    matrix = flint.nmod_mat([[int(master[j - b]) if j >= b else 0 for b in gaps] for j in chosen], prime)
    right = flint.nmod_mat([[prime - row[j] for row in conditions] for j in chosen], prime)
    try:
        solved = matrix.solve(right)
    except (ZeroDivisionError, ValueError):
        raise UnluckyPrimeError(prime, length, length - len(gaps)) from None
    return np.array([[int(x) for x in row] for row in solved.tolist()], dtype=np.uint64).T


def _evaluated(poly: ModularPolynomial, points: Residues, prime: int) -> Residues:
    """Values of a polynomial at many points."""
    if len(points) < _FAST_EVALUATION:
        return np.array([int(poly(int(x))) for x in points], dtype=np.uint64)
    context = flint.fmpz_mod_poly_ctx(flint.fmpz_mod_ctx(prime))
    moved = context([int(c) for c in poly.coeffs()])
    return np.array([int(x) for x in moved.multipoint_evaluate([int(x) for x in points])], dtype=np.uint64)
