"""Probing a coupled block: does its Fuchsian form exist at random parameters, and with which exponents."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from random import Random

import flint

from ibpred.epsform.lattices.image import Pattern, pencil_at
from ibpred.epsform.lattices.local import Obstacle, Trouble
from ibpred.epsform.lattices.pencil import ModularMatrix
from ibpred.epsform.lattices.sections import Glued, glue
from ibpred.epsform.lattices.spectrum import Slopes
from ibpred.errors import UnfinishedError

BASE_POINTS = (2, 3, -2, -3, 5, 7, -5, 11, 13, 17)
"""Base points x = O where the change of basis is normalised; the first regular one serves."""
PROBES = 3
"""Samples that must agree on an obstacle before it is believed."""
ATTEMPTS = 60
"""Samples tried to get that many useful ones."""

Residues = tuple[ModularMatrix, ...]
"""``R_l / eps`` for each finite place (a zero matrix where there is no place)."""


@dataclass(frozen=True)
class Probe:
    """What random samples have in common.

    Attributes
    ----------
    base
        The base point x = O.
    slopes
        The slopes of the exponents at all points.
    residues
        Canonical residues of each sample.
    """

    base: int
    slopes: Slopes
    residues: tuple[Residues, ...]


def glued_at(
    pattern: Pattern, values: Sequence[int], slopes: Slopes | None, prime: int, base: int
) -> Glued | Obstacle | None:
    """The Fuchsian form at numeric parameters (eps first); None where the sample is useless."""
    image = pencil_at(pattern, values, prime)
    if image is None or int(image[0].denominator(base % prime)) == 0:
        return None
    return glue(*image, values[0], slopes, base % prime)


def letter_residues(glued: Glued, pattern: Pattern, eps: int, prime: int) -> Residues | Obstacle:
    """``R_l / eps`` for each place; an obstacle if conjugate roots differ or a moving place survives."""
    inverse_eps = pow(eps, -1, prime)
    owners = [i for i, place in enumerate(pattern.places) for _ in range(place.degree)]
    found: dict[int, ModularMatrix] = {}
    zero = flint.nmod_mat(len(glued.numerators), len(glued.numerators), prime)
    for owner, residue in zip(owners, glued.residues, strict=True):
        if pattern.places[owner].moves and residue != zero:
            return Obstacle(Trouble.MOVING, owner, (), glued.exponents)
        matrix = residue * inverse_eps
        if owner in found and found[owner] != matrix:
            return Obstacle(Trouble.CONJUGATE, owner, (), glued.exponents)
        found[owner] = matrix
    return tuple(found[i] for i in range(len(pattern.places))) or (zero,)


def probe(pattern: Pattern, prime: int, seed: int, subject: str) -> Probe | Obstacle:
    """Samples at random parameters, or the obstacle on which several of them agree.

    Raises
    ------
    UnfinishedError
        If the samples disagree, or too few are useful.
    """
    random = Random(seed)
    obstacles: list[Obstacle] = []
    useful: list[Residues] = []
    slopes: Slopes = frozenset()
    base: int | None = None
    for _ in range(ATTEMPTS):
        values = [random.randrange(2, prime) for _ in pattern.parameters]
        image = pencil_at(pattern, values, prime)
        if image is None:
            continue
        if base is None:
            base = next((b for b in BASE_POINTS if int(image[0].denominator(b % prime))), None)
            if base is None:
                raise UnfinishedError(f"{subject}: every base point among {BASE_POINTS} is singular")
        here = glued_at(pattern, values, slopes or None, prime, base)
        if here is None:
            continue
        found = letter_residues(here, pattern, values[0], prime) if isinstance(here, Glued) else here
        if isinstance(found, Obstacle):
            obstacles.append(found)
            if obstacles.count(found) == PROBES:
                return found
            continue
        useful.append(found)
        slopes |= {e.slopes for _, exponents in here.exponents for e in exponents}
        if len(useful) == PROBES:
            return Probe(base, slopes, tuple(useful))
    raise UnfinishedError(
        f"{subject}: samples at different eps disagree about its singular points, or its moving poles "
        "rarely have roots modulo the prime; choose masters whose denominators do not mix eps with "
        f"{pattern.name}"
    )
