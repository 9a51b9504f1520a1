"""Lower facets of a Newton polytope and separation of two sets of exponents, verified exactly.

Candidates come from floating-point geometry; every hyperplane returned is computed from its points in
integer arithmetic and checked against all points.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from math import factorial, lcm
from typing import Any

import flint
import numpy as np
from scipy.optimize import linprog
from scipy.spatial import ConvexHull

from ibpred.errors import BoundaryError

Vector = tuple[Fraction, ...]
Exponents = Sequence[int]


@dataclass(frozen=True)
class LowerFacet:
    """``p + normal . r >= offset`` for all points (r, p), with equality on a facet.

    Attributes
    ----------
    normal
        v, one component for each exponent in r.
    offset
        The least value of p + v . r.
    """

    normal: Vector
    offset: Fraction


def lower_facets(points: Sequence[tuple[Exponents, int]]) -> tuple[LowerFacet, ...]:
    """Facets of the convex hull of points (r, p) whose inward normal has a positive p-component.

    Where all points lie in one hyperplane that is a graph over r, that hyperplane is the one facet.

    Parameters
    ----------
    points
        (r, p) with integer components; the r must span their space affinely.

    Raises
    ------
    BoundaryError
        If the r do not span (the integral is scaleless), or the facets that pass the exact check do not
        cover the projection.
    """
    return _facets_of(tuple(sorted({(*r, p) for r, p in points})))


@lru_cache(maxsize=4096)
def _facets_of(rows: tuple[tuple[int, ...], ...]) -> tuple[LowerFacet, ...]:
    width = len(rows[0])
    base = rows[0]
    differences = [[a - b for a, b in zip(row, base, strict=True)] for row in rows[1:]]
    if not differences or _rank([d[:-1] for d in differences]) < width - 1:
        raise BoundaryError("a Newton polytope is degenerate: the integral is scaleless")
    if _rank(differences) == width - 1:
        facet = _hyperplane(rows, rows)
        if facet is None:
            raise BoundaryError("a Newton polytope is degenerate along the ratio")
        return (facet,)
    if width == 2:
        return _planar(rows)
    everything = np.array(rows)
    hull = ConvexHull(everything.astype(float), qhull_options="Qt")
    # qhull's normals point outwards; a slight tilt is left to the exact check
    simplices = hull.simplices[hull.equations[:, width - 1] <= 1e-9]
    corners = everything[simplices][:, :, :-1]
    sizes = np.rint(np.abs(np.linalg.det((corners[:, 1:] - corners[:, :1]).astype(float))))
    found: dict[LowerFacet, None] = {}
    covered = 0.0
    pending = np.flatnonzero(sizes)
    while len(pending):
        facet = _hyperplane([rows[i] for i in simplices[pending[0]]], rows)
        if facet is None:
            pending = pending[1:]
            continue
        found[facet] = None
        # all simplices on this facet at once
        inside = (_above(facet, rows) == 0)[simplices[pending]].all(axis=1)
        covered += float(sizes[pending[inside]].sum())
        pending = pending[~inside]
    # the simplices of the lower facets project onto all of the projection: no facet is missing
    volume = ConvexHull(everything[:, :-1].astype(float)).volume * factorial(width - 1)
    if covered < volume * (1 - 1e-9):
        raise BoundaryError("the lower facets of a Newton polytope do not cover it: a region is missing")
    return tuple(sorted(found, key=lambda f: (f.normal, f.offset)))


def _above(facet: LowerFacet, rows: Sequence[Sequence[int]]) -> Any:
    """Height of points above a facet's hyperplane, in integers up to a common positive factor."""
    scale = lcm(facet.offset.denominator, *(v.denominator for v in facet.normal))
    normal = [int(v * scale) for v in facet.normal] + [scale]
    offset = int(facet.offset * scale)
    most = max(abs(v) for row in rows for v in row) * sum(map(abs, normal)) + abs(offset)
    exact = np.int64 if most < 2**62 else object
    return np.array(rows, dtype=exact) @ np.array(normal, dtype=exact) - offset


def _planar(rows: Sequence[tuple[int, ...]]) -> tuple[LowerFacet, ...]:
    found: dict[LowerFacet, None] = {}
    for i, left in enumerate(rows):
        for right in rows[i + 1 :]:
            facet = _hyperplane([left, right], rows)
            if facet is not None:
                found[facet] = None
    return tuple(sorted(found, key=lambda f: (f.normal, f.offset)))


def _hyperplane(corners: Sequence[Sequence[int]], rows: Sequence[Sequence[int]]) -> LowerFacet | None:
    """The hyperplane through the corners as a lower facet; None if degenerate, vertical or not supporting."""
    width = len(corners[0])
    base = corners[0]
    matrix = flint.fmpq_mat([[a - b for a, b in zip(row, base, strict=True)] for row in corners[1:]])
    reduced, rank = matrix.rref()
    if rank != width - 1:
        return None
    pivots = [next(c for c in range(width) if reduced[r, c] != 0) for r in range(rank)]
    if pivots != list(range(width - 1)):
        return None  # vertical: no p-component
    # the reduced rows are e_c + q_c e_last, so the normal (v, 1) has v_c = -q_c
    last = [reduced[c, width - 1] for c in range(width - 1)]
    normal = tuple(Fraction(-int(q.p), int(q.q)) for q in last)
    offset = base[-1] + sum((v * e for v, e in zip(normal, base, strict=False)), Fraction(0))
    facet = LowerFacet(normal, offset)
    return facet if (_above(facet, rows) >= 0).all() else None


def _rank(rows: Sequence[Sequence[int]]) -> int:
    if not rows or not rows[0]:
        return 0
    return int(flint.fmpz_mat([list(row) for row in rows]).rank())


def separating_functional(above: Sequence[Exponents], below: Sequence[Exponents]) -> tuple[int, ...] | None:
    """An integer vector phi with ``phi . r > phi . q`` for all r in `above` and q in `below`.

    Returns
    -------
    tuple or None
        The functional, verified in integer arithmetic; None where no strict separation was found. Either
        set may be empty.
    """
    if not above or not below:
        width = len((*above, *below)[0])
        return (0,) * width
    width = len(above[0])
    # maximise the gap: phi.r >= h + gap, phi.q <= h - gap, |phi| <= 1
    constraints = [[*(-float(e) for e in r), 1.0, 1.0] for r in above]
    constraints += [[*(float(e) for e in q), -1.0, 1.0] for q in below]
    result = linprog(
        [0.0] * width + [0.0, -1.0],
        A_ub=np.array(constraints),
        b_ub=np.zeros(len(constraints)),
        bounds=[(-1.0, 1.0)] * width + [(None, None), (None, 1.0)],
        method="highs",
    )
    if result.status != 0 or result.x is None or result.x[-1] < 1e-7:
        return None
    direction = [float(v) for v in result.x[:width]]
    for scale in (1, 2, 6, 60, 2520, 10**6):
        phi = tuple(round(v * scale) for v in direction)
        least = min(sum(p * e for p, e in zip(phi, r, strict=True)) for r in above)
        most = max(sum(p * e for p, e in zip(phi, q, strict=True)) for q in below)
        if least > most:
            return phi
    return None
