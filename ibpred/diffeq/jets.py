"""Values and first derivatives of rational functions at random points modulo a prime."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from ibpred.diffeq.system import SparseMatrix
from ibpred.exact.rational import Polynomial
from ibpred.reconstruct.modular import (
    Residues,
    add,
    invert,
    matrix_product,
    monomials,
    multiply,
    residues,
    subtract,
)


@dataclass(frozen=True)
class MatrixJets:
    """A sparse matrix of functions at some points, with its derivatives in all variables.

    Attributes
    ----------
    values
        uint64 (points, n, n).
    derivatives
        uint64 (points, variables, n, n).
    """

    values: Residues
    derivatives: Residues


def matrix_jets(entries: SparseMatrix, size: int, points: Residues, prime: int) -> MatrixJets:
    """Evaluate the entries of a matrix and their derivatives.

    Parameters
    ----------
    entries
        Nonzero entries.
    size
        Number of rows and columns.
    points
        (variables, B), in the order of the entries' ring, none of them zero.
    prime
        A prime of 40 to 50 bits.

    Raises
    ------
    ZeroDivisionError
        If a denominator vanishes at one of the points.
    """
    variables, count = points.shape
    values = np.zeros((count, size, size), dtype=np.uint64)
    derivatives = np.zeros((count, variables, size, size), dtype=np.uint64)
    inverse_points = invert(points, prime)
    known: dict[str, Residues] = {}
    for row, column, value in entries:
        name = str(value.denominator)
        if name not in known:
            known[name] = _polynomial_jet(value.denominator, points, inverse_points, prime)
        top, below = _polynomial_jet(value.numerator, points, inverse_points, prime), known[name]
        if not below[0].all():
            raise ZeroDivisionError(f"a denominator vanishes modulo {prime}")
        inverse = invert(below[0], prime)
        whole = multiply(top[0], inverse, prime)
        # (n/d)' = (n' - (n/d) d') / d
        slopes = subtract(top[1:], multiply(below[1:], whole[None, :], prime), prime)
        values[:, row, column] = whole
        derivatives[:, :, row, column] = multiply(slopes, inverse[None, :], prime).T
    return MatrixJets(values, derivatives)


def _polynomial_jet(
    polynomial: Polynomial, points: Residues, inverse_points: Residues, prime: int
) -> Residues:
    """Value and derivatives, (1 + variables, B); ``x d/dx`` multiplies a monomial by its exponent."""
    variables, count = points.shape
    terms = polynomial.to_dict()
    if not terms:
        return np.zeros((1 + variables, count), dtype=np.uint64)
    exponents = np.array([[int(e) for e in row] for row in terms], dtype=np.int64)
    exponents = exponents.reshape(len(terms), variables)
    coefficients = residues([int(c) for c in terms.values()], prime)
    weights = np.vstack([np.ones((1, len(terms)), dtype=np.uint64), exponents.T.astype(np.uint64)])
    factors = multiply(weights, coefficients[None, :], prime)
    found = matrix_product(factors, monomials(exponents, points, prime), prime)
    found[1:] = multiply(found[1:], inverse_points, prime)
    return found


def curvature(first: MatrixJets, second: MatrixJets, v: int, w: int, prime: int) -> Residues:
    """``dA_w/dv - dA_v/dw + A_w A_v - A_v A_w`` at every point; v, w are places of the variables."""
    total = subtract(second.derivatives[:, v], first.derivatives[:, w], prime)
    products = [
        subtract(matrix_product(b, a, prime), matrix_product(a, b, prime), prime)
        for a, b in zip(first.values, second.values, strict=True)
    ]
    return add(total, np.array(products, dtype=np.uint64), prime)


def weighted_sum(jets: Sequence[MatrixJets], weights: Residues, prime: int) -> Residues:
    """``sum_v weights_v A_v`` at every point; the weights have shape (matrices, B)."""
    total = np.zeros_like(jets[0].values)
    for jet, weight in zip(jets, weights, strict=True):
        total = add(total, multiply(jet.values, weight[:, None, None], prime), prime)
    return total
