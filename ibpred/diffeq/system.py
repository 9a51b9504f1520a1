"""The record of a differential system of master integrals."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from ibpred.exact.rational import Rational, Ring
from ibpred.family.definition import Powers

SparseMatrix = tuple[tuple[int, int, Rational], ...]
"""Nonzero entries (row, column, value), sorted."""


@dataclass(frozen=True)
class DifferentialSystem:
    """``d I_i / d v = sum_j A_v[i][j] I_j`` for every invariant v, the unit included.

    Attributes
    ----------
    family
        Name of the family.
    masters
        Powers of the masters, simple sectors first (so the matrices are block lower triangular).
    variables
        The invariants in file order.
    dimensions
        Their mass dimensions.
    unit
        The invariant set to one inside the engine; None where there is no invariant.
    dimension
        d0 in d = d0 - 2 eps.
    ring
        Q(d, invariants).
    matrices
        For each variable the nonzero entries, in `ring`, the unit restored.
    singular_locus
        Irreducible polynomials in the invariants where some matrix has a pole, in `ring`.
    """

    family: str
    masters: tuple[Powers, ...]
    variables: tuple[str, ...]
    dimensions: tuple[int, ...]
    unit: str | None
    dimension: int
    ring: Ring
    matrices: Mapping[str, SparseMatrix]
    singular_locus: tuple[Rational, ...]
