"""Relations between integrals of equivalent sectors, from maps of momenta or of parameters."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ibpred.family.definition import FamilyDefinition
from ibpred.identities.expansion import Terms, expand, numerator_images
from ibpred.identities.packing import Packing
from ibpred.identities.pool import CoefficientPool
from ibpred.sectors.mapping import SectorMap
from ibpred.sectors.order import lines_of

IntArray = NDArray[np.int64]


@dataclass(frozen=True)
class Entries:
    """Rows in coordinate form: row, code of the integral, number of the coefficient.

    `owners` are the powers of the integral, or of the seed, that each row belongs to.
    """

    row: IntArray
    integral: IntArray
    coefficient: NDArray[np.int32]
    owners: IntArray


def symmetry_rows(
    map_: SectorMap,
    powers: IntArray,
    family: FamilyDefinition,
    code: Packing,
    pool: CoefficientPool,
    target_code: Packing | None = None,
) -> Entries:
    """One row ``image of I(a) - I(a) = 0`` for each integral of the map's source sector.

    Where cut lines change their sign, I(a) comes with the sign (-1)^(sum of their dots).

    Parameters
    ----------
    map_
        A map from the family. It is applied to the integrals whose numerators all have images.
    powers
        (integrals, lines), all in the source sector.
    code
        The packing of integrals.
    pool
        Where coefficients are numbered.
    target_code
        The packing of the images, where the map leads to another family.
    """
    n = len(family.lines)
    inside = np.array(lines_of(map_.source), dtype=np.int64)
    others = [i for i in range(n) if not map_.source >> i & 1]
    outside = np.array([i for i in others if map_.reaches(i)], dtype=np.int64)
    unreached = np.array([i for i in others if not map_.reaches(i)], dtype=np.int64)
    powers = powers[(powers[:, unreached] == 0).all(axis=1)]
    if not len(powers):
        return _nothing(n)
    moved = np.zeros_like(powers)
    moved[:, np.array(map_.lines, dtype=np.int64)] = powers[:, inside]
    flips = np.array(map_.flips, dtype=np.int64)
    odd = (powers[:, flips] - 1).sum(axis=1, keepdims=True) % 2
    distinct, group = _groups(np.hstack([odd, -powers[:, outside]]))
    signs, numerators = 1 - 2 * distinct[:, 0], distinct[:, 1:]
    if not distinct.any():
        unit = (0,) * len(pool.variables)
        plus = np.array([pool.number({unit: 1})], dtype=np.int32)
        minus = np.array([pool.number({unit: -1})], dtype=np.int32)
        expansions = [(np.zeros((1, n), dtype=np.int64), plus, minus, np.zeros(1, dtype=np.int32))]
        group = np.zeros(len(powers), dtype=np.int64)
    else:
        expansions = _expansions(map_, family, numerators, signs, pool)
    return _assemble(powers, group, expansions, code.code(powers), (target_code or code).code(moved), code)


def _nothing(n: int) -> Entries:
    empty = np.zeros(0, dtype=np.int64)
    return Entries(empty, empty, np.zeros(0, dtype=np.int32), np.zeros((0, n), dtype=np.int64))


def _groups(numerators: IntArray) -> tuple[IntArray, IntArray]:
    distinct, place = np.unique(numerators, axis=0, return_inverse=True)
    return distinct, place.reshape(-1)


Expansion = tuple[IntArray, NDArray[np.int32], NDArray[np.int32], NDArray[np.int32]]
"""Shifts, their coefficients; the source's coefficient alone, and (per shift) merged with the term's."""


def _expansions(
    map_: SectorMap,
    family: FamilyDefinition,
    numerators: IntArray,
    signs: IntArray,
    pool: CoefficientPool,
) -> list[Expansion]:
    images = numerator_images(map_, family, int(numerators.sum(axis=1).max()))
    memo: dict[tuple[int, ...], Terms] = {}
    weights: dict[tuple[int, ...], Terms] = {}
    codes, values, owner = [], [], []
    for g, row in enumerate(map(tuple, numerators.tolist())):
        top, bottom = expand(images.factors, row, memo), expand(images.denominators, row, weights)
        # the source's own coefficient comes first, marked by an owner of its own
        codes += [bottom[0], top[0]]
        values += [-bottom[1] * signs[g], top[1]]
        owner += [np.full(len(bottom[0]), 2 * g), np.full(len(top[0]), 2 * g + 1)]
    vectors = images.code.vectors(np.concatenate(codes))
    exponents, monomial = vectors[:, : images.width], vectors[:, images.width :]
    kinds, monomial_place = np.unique(monomial, axis=0, return_inverse=True)
    key = np.column_stack([np.concatenate(owner), exponents])
    terms, term_place = np.unique(key, axis=0, return_inverse=True)
    dense = np.zeros((len(terms), len(kinds)), dtype=np.int64)
    np.add.at(dense, (term_place.reshape(-1), monomial_place.reshape(-1)), np.concatenate(values))
    names = [pool.monomial(tuple(row)) for row in kinds.tolist()]
    ids = pool.numbers(dense, names)
    bounds = np.searchsorted(terms[:, 0], np.arange(2 * len(numerators) + 1))
    # where a term is the source itself, both coefficients merge
    own = bounds[2 * (terms[:, 0] // 2)]
    merged = pool.numbers(dense + dense[own], names)
    found: list[Expansion] = []
    for g in range(len(numerators)):
        at, begin, end = bounds[2 * g : 2 * g + 3].tolist()
        found.append((-terms[begin:end, 1:], ids[begin:end], ids[at : at + 1], merged[begin:end]))
    return found


def _assemble(
    powers: IntArray,
    group: IntArray,
    expansions: list[Expansion],
    source: IntArray,
    target: IntArray,
    code: Packing,
) -> Entries:
    order = np.argsort(group, kind="stable")
    bounds = np.searchsorted(group[order], np.arange(len(expansions) + 1))
    rows, integrals, coefficients = [], [], []
    for g, (shifts, ids, own, merged) in enumerate(expansions):
        members = order[bounds[g] : bounds[g + 1]]
        images = target[members][:, None] + code.shift(shifts)[None, :]
        same = images == source[members][:, None]
        rows += [np.repeat(members, len(ids)), members]
        integrals += [images.ravel(), source[members]]
        coefficients += [
            np.where(same, merged[None, :], ids[None, :]).ravel(),
            np.where(same.any(axis=1), 0, own[0]).astype(np.int32),
        ]
    row, integral = np.concatenate(rows), np.concatenate(integrals)
    coefficient = np.concatenate(coefficients).astype(np.int32)
    kept = coefficient != 0
    return Entries(row[kept], integral[kept], coefficient[kept], powers)
