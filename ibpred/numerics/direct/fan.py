"""The normal fan of the Newton polytope of U*F, cut into simplicial cones, in exact arithmetic.

With x_i = prod_j t_j^(r_ji) for the rays r_j of one cone, U and F become a monomial in t times a
polynomial with a constant term: the geometric sector decomposition of T. Kaneko, T. Ueda,
arXiv:0908.2897, in the form of a subdivision of the space of logarithms of the parameters.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import gcd

import flint
import numpy as np
from numpy.typing import NDArray

from ibpred.errors import InputError, UnfinishedError

Integers = NDArray[np.int64]

_DIRECTIONS = 200


@dataclass(frozen=True)
class Cone:
    """A simplicial cone of exponent vectors.

    Attributes
    ----------
    rays
        (n, n), primitive integer vectors, linearly independent.
    """

    rays: Integers

    @property
    def volume(self) -> int:
        """Absolute value of the determinant of the rays."""
        return abs(int(flint.fmpz_mat(self.rays.tolist()).det())) if len(self.rays) else 1


def simplicial_fan(points: Integers) -> tuple[Cone, ...]:
    """Simplicial cones that cover R^n once, on each of which one point is least in every direction.

    Parameters
    ----------
    points
        (N, n) integer points that span R^n affinely.

    Raises
    ------
    InputError
        If the points lie in a hyperplane: the integral is scaleless.
    UnfinishedError
        If the cones fail to cover random directions exactly once.
    """
    points = np.unique(points, axis=0)
    n = points.shape[1]
    if n == 0:
        return (Cone(np.zeros((0, 0), dtype=np.int64)),)
    if flint.fmpz_mat((points[1:] - points[0]).tolist() or [[0] * n]).rank() < n:
        raise InputError(
            "the Newton polytope of U*F is degenerate: the integral is scaleless and vanishes in "
            "dimensional regularisation"
        )
    rays = _facet_normals(points)
    heights = rays @ points.T
    on_facet = heights == heights.min(axis=1)[:, None]
    cones: list[Cone] = []
    for v in range(len(points)):
        here = frozenset(int(f) for f in np.nonzero(on_facet[:, v])[0])
        if len(here) < n or flint.fmpz_mat(rays[sorted(here)].tolist()).rank() < n:
            continue
        shared = {
            here & frozenset(np.nonzero(on_facet[:, w])[0].tolist()) for w in range(len(points)) if w != v
        }
        for chosen in _pulling(here, sorted(shared, key=sorted), n):
            cones.append(Cone(rays[list(chosen)]))
    _check_cover(cones, n)
    return tuple(cones)


def _facet_normals(points: Integers) -> Integers:
    """Primitive inner normals of the facets of a full-dimensional polytope."""
    n = points.shape[1]
    if n == 1:
        return np.array([[1], [-1]], dtype=np.int64)
    from scipy.spatial import ConvexHull

    found: set[tuple[int, ...]] = set()
    # floating point only proposes the facets: each normal is solved for and checked in integers
    for simplex in ConvexHull(points.astype(np.float64)).simplices:
        corner = points[simplex]
        kernel, nullity = flint.fmpz_mat((corner[1:] - corner[0]).tolist()).nullspace()
        if nullity != 1:
            continue
        normal = [int(kernel[i, 0]) for i in range(n)]
        common = gcd(*normal)
        normal = [x // common for x in normal]
        heights = points @ np.array(normal)
        base = int(corner[0] @ np.array(normal))
        if heights.min() == base:
            found.add(tuple(normal))
        elif heights.max() == base:
            found.add(tuple(-x for x in normal))
    return np.array(sorted(found), dtype=np.int64)


def _pulling(rays: frozenset[int], faces: list[frozenset[int]], n: int) -> list[tuple[int, ...]]:
    """Triangulate a cone of dimension n without new rays, from the ray sets of its faces.

    One ray is joined with the triangulations of all facets that do not contain it ("pulling", see
    C. W. Lee, W. Morris, in: Handbook of Discrete and Computational Geometry); which rays lie on
    which faces is all that is used, so the result is exact.
    """
    if len(rays) == n:
        return [tuple(sorted(rays))]
    proper = {rays & face for face in faces} - {rays, frozenset()}
    facets = [f for f in proper if not any(f < g for g in proper)]
    counts = {ray: sum(ray in facet for facet in facets) for ray in rays}
    apex = min(rays, key=lambda ray: (-counts[ray], ray))
    result = []
    for facet in sorted(facets, key=sorted):
        if apex not in facet:
            result += [tuple(sorted((apex, *part))) for part in _pulling(facet, faces, n - 1)]
    return result


def coverage(cones: tuple[Cone, ...] | list[Cone], directions: NDArray[np.float64]) -> NDArray[np.int64]:
    """How many cones contain each direction.

    Parameters
    ----------
    directions
        (D, n).
    """
    count = np.zeros(len(directions), dtype=np.int64)
    for cone in cones:
        weights = np.linalg.solve(cone.rays.T.astype(np.float64), directions.T)
        count += (weights > 0).all(axis=0)
    return count


def _check_cover(cones: list[Cone], n: int) -> None:
    directions = np.random.default_rng(n).normal(size=(_DIRECTIONS, n))
    wrong = int((coverage(cones, directions) != 1).sum())
    if wrong:
        raise UnfinishedError(
            f"the decomposition into sectors failed: {wrong} of {_DIRECTIONS} random directions are not "
            "covered exactly once"
        )
