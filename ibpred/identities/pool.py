"""The distinct coefficients of a system, collected while its rows are written."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from ibpred.identities.templates import Template

IntArray = NDArray[np.int64]
IdArray = NDArray[np.int32]

_ENUMERATED = 2048  # values of a few powers that are looked up instead of computed row by row


class CoefficientPool:
    """Numbers the distinct polynomials that occur as coefficients; number 0 is zero.

    The one mutable helper of this room: it lives while one system is built.
    """

    def __init__(self, variables: tuple[str, ...]) -> None:
        self.variables = variables
        self._monomials: dict[tuple[int, ...], int] = {}
        self._ids: dict[tuple[tuple[int, int], ...], int] = {(): 0}

    def monomial(self, exponents: tuple[int, ...]) -> int:
        """Number of a monomial."""
        return self._monomials.setdefault(exponents, len(self._monomials))

    def number(self, polynomial: Mapping[tuple[int, ...], int]) -> int:
        """Number of one polynomial."""
        terms = sorted((self.monomial(e), int(c)) for e, c in polynomial.items() if c)
        return self._ids.setdefault(tuple(terms), len(self._ids))

    def numbers(self, values: IntArray, monomials: Sequence[int]) -> IdArray:
        """Numbers of many polynomials, given densely over some monomials.

        Parameters
        ----------
        values
            (polynomials, monomials).
        monomials
            Their numbers.
        """
        if not len(values):
            return np.zeros(0, dtype=np.int32)
        distinct, place = distinct_rows(values)
        order = np.argsort(np.array(monomials, dtype=np.int64), kind="stable")
        names = [int(monomials[i]) for i in order]
        ids = []
        for row in distinct[:, order].tolist():
            terms = tuple((m, c) for m, c in zip(names, row, strict=True) if c)
            ids.append(self._ids.setdefault(terms, len(self._ids)))
        return np.array(ids, dtype=np.int32)[place]

    def of_template(self, template: Template, seeds: IntArray) -> IdArray:
        """Numbers of a template's coefficients at many seeds: (terms, seeds)."""
        monomials = [self.monomial(e) for e in template.monomials]
        found = np.empty((template.terms, len(seeds)), dtype=np.int32)
        low, high = seeds.min(axis=0), seeds.max(axis=0)
        for t in range(template.terms):
            values = template.values[t]
            active = np.flatnonzero(values[:, :-1].any(axis=0))
            sizes = (high - low + 1)[active]
            if float(np.prod(sizes.astype(float))) <= min(_ENUMERATED, len(seeds)):
                grids = np.indices(tuple(sizes)).reshape(len(active), -1).T + low[active]
                table = self.numbers(grids @ values[:, active].T + values[:, -1], monomials)
                place = np.zeros(len(seeds), dtype=np.int64)
                for column, size in zip(active, sizes, strict=True):
                    place = place * size + (seeds[:, column] - low[column])
                found[t] = table[place]
            else:
                found[t] = self.numbers(seeds[:, active] @ values[:, active].T + values[:, -1], monomials)
        return found

    def arrays(self) -> tuple[IntArray, IntArray]:
        """All coefficients numbered so far.

        Returns
        -------
        exponents
            (monomials, variables).
        values
            (coefficients, monomials).
        """
        exponents = np.array(list(self._monomials), dtype=np.int64)
        values = np.zeros((len(self._ids), len(self._monomials)), dtype=np.int64)
        for terms, i in self._ids.items():
            for m, c in terms:
                values[i, m] = c
        return exponents.reshape(len(self._monomials), len(self.variables)), values


def distinct_rows(values: IntArray) -> tuple[IntArray, NDArray[np.int64]]:
    """Distinct rows of a matrix, and the place of each row among them.

    Rows are told apart by a linear hash; the result is compared with the input, so a collision
    (which only costs time) is never silent.
    """
    width = values.shape[1]
    if width == 1:
        distinct, place = np.unique(values[:, 0], return_inverse=True)
        return distinct[:, None], place
    generator = np.random.Generator(np.random.PCG64(width))
    multipliers = generator.integers(1, 2**63 - 1, size=width, dtype=np.int64) | 1
    with np.errstate(over="ignore"):
        code = (values * multipliers).sum(axis=1)
    _, first, place = np.unique(code, return_index=True, return_inverse=True)
    found = values[first]
    if np.array_equal(found[place], values):
        return found, place
    exact, place = np.unique(values, axis=0, return_inverse=True)
    return exact, place
