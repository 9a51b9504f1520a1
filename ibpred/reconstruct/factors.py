"""Irreducible factors over Z that denominators and numerators share."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ibpred.exact.rational import Polynomial, Ring
from ibpred.reconstruct.modular import Residues, invert, matrix_product, monomials, multiply, residues
from ibpred.reconstruct.sampling import Line
from ibpred.reconstruct.univariate import ModularPolynomial, polynomial


@dataclass(frozen=True)
class Factor:
    """A primitive irreducible polynomial.

    Attributes
    ----------
    polynomial
        In the ring of the black box's variables, leading coefficient positive.
    exponents
        (terms, variables).
    coefficients
        Of the terms.
    """

    polynomial: Polynomial
    exponents: NDArray[np.int64]
    coefficients: tuple[int, ...]

    def degrees(self) -> NDArray[np.int64]:
        """Degree in each variable."""
        highest: NDArray[np.int64] = self.exponents.max(axis=0)
        return highest

    def values(self, points: Residues, prime: int) -> Residues:
        """Values at points (variables, B) modulo a prime."""
        row = residues(self.coefficients, prime)[None, :]
        found: Residues = matrix_product(row, monomials(self.exponents, points, prime), prime)[0]
        return found

    def restricted(self, line: Line) -> ModularPolynomial:
        """The factor along a line, a univariate polynomial in its parameter."""
        prime = line.prime
        total = polynomial([], prime)
        coordinates = [
            polynomial([int(a), int(b)], prime) for a, b in zip(line.base, line.direction, strict=True)
        ]
        for exponents, coefficient in zip(self.exponents, self.coefficients, strict=True):
            term = polynomial([coefficient % prime], prime)
            for coordinate, exponent in zip(coordinates, exponents, strict=True):
                if exponent:
                    term = term * coordinate ** int(exponent)
            total = total + term
        return total


def factor(poly: Polynomial, ring: Ring) -> Factor:
    """Wrap an irreducible primitive polynomial, its sign made canonical."""
    if poly.leading_coefficient() < 0:
        poly = -poly
    terms = poly.to_dict()
    exponents = np.array([[int(e) for e in m] for m in terms], dtype=np.int64)
    return Factor(poly, exponents.reshape(len(terms), len(ring.names)), tuple(int(c) for c in terms.values()))


def products(
    factors: tuple[Factor, ...], powers: NDArray[np.int64], points: Residues, prime: int
) -> tuple[Residues, NDArray[np.bool_]]:
    """Products of powers of the factors at points.

    Parameters
    ----------
    powers
        (rows, factors), of either sign.
    points
        (variables, B).

    Returns
    -------
    values, good
        (rows, B), and which points no factor vanishes at.
    """
    count = points.shape[1]
    good = np.ones(count, dtype=np.bool_)
    values = np.ones((len(powers), count), dtype=np.uint64)
    for k, item in enumerate(factors):
        column = powers[:, k]
        if not column.any():
            continue
        base = item.values(points, prime)
        good &= base != 0
        base[base == 0] = 1
        power = np.ones(count, dtype=np.uint64)
        for e in range(1, int(column.max()) + 1):
            power = multiply(power, base, prime)
            values[column == e] = multiply(values[column == e], power, prime)
        if column.min() < 0:
            base = invert(base, prime)
            power = np.ones(count, dtype=np.uint64)
            for e in range(1, -int(column.min()) + 1):
                power = multiply(power, base, prime)
                values[column == -e] = multiply(values[column == -e], power, prime)
    return values, good
