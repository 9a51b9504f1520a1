"""A system with simple poles only, taken apart into residues and, where roots occur, values at points."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from random import Random

import flint

from ibpred.epsform.blocks import Finding, conjugate, moving, not_fuchsian_root
from ibpred.epsform.form import Matrix
from ibpred.epsform.places import Place, degree, growth, places_of
from ibpred.epsform.roots.tags import Tag, difference, root_class
from ibpred.errors import UnfinishedError
from ibpred.exact.rational import Rational, Ring

_POINTS = range(2, 40)
_MOST_POINTS = 400


@dataclass(frozen=True)
class Fuchsian:
    """``A = sum_l R_l(eps) dlog(letter_l)`` for all couplings without a root.

    Attributes
    ----------
    places, residues
        Letters and R_l.
    odd
        What is linearly independent in the couplings with roots: their values at some points.
    """

    places: tuple[Place, ...]
    residues: tuple[Matrix, ...]
    odd: tuple[Matrix, ...]


@dataclass(frozen=True)
class Stuck:
    """A block of rows whose coupling has no epsilon-form."""

    block: int
    finding: Finding


def fuchsian(
    matrices: Mapping[str, Matrix],
    blocks: Sequence[range],
    tags: Sequence[Tag],
    ring: Ring,
    prime: int,
    seed: int,
) -> Fuchsian | Stuck:
    """Take an integrable system with simple poles that vanishes at infinity in every ratio apart.

    Parameters
    ----------
    matrices
        For each ratio the couplings between the functions, without the roots (see `tags`).
    blocks
        The rows of each diagonal block.
    tags
        The tag of each row.
    prime, seed
        For the choice of points.
    """
    owner = {row: k for k, block in enumerate(blocks) for row in block}
    places: dict[str, Place] = {}
    residues: list[Matrix] = []
    for name, matrix in matrices.items():
        even = tuple(
            tuple(e if tags[i] == tags[j] else ring.zero for j, e in enumerate(row))
            for i, row in enumerate(matrix)
        )
        for place in places_of((e for row in even for e in row), ring, name):
            # a letter with two ratios has the same residue in both, since the system is integrable
            if place.text() in places:
                continue
            places[place.text()] = place
            rows = []
            for i, row in enumerate(even):
                values = []
                for entry in row:
                    residue = _residue(entry, place, ring)
                    if isinstance(residue, Finding):
                        return Stuck(owner[i], residue)
                    values.append(residue)
                rows.append(tuple(values))
            residues.append(tuple(rows))
        for i, row in enumerate(matrix):
            for j, entry in enumerate(row):
                if entry and tags[i] != tags[j]:
                    finding = _odd_trouble(entry, difference(tags[i], tags[j]), ring, name)
                    if finding is not None:
                        return Stuck(owner[i], finding)
    odd = _independent_values(matrices, tags, ring, prime, seed)
    return Fuchsian(tuple(places.values()), tuple(residues), odd)


def _residue(entry: Rational, place: Place, ring: Ring) -> Rational | Finding:
    if not entry:
        return ring.zero
    residue = place.divide(place.principal(entry, 1), place.slope())
    if any(residue[1:]):
        return Finding(conjugate(place.text()), ())
    if place.moves and residue[0]:
        return Finding(moving(place.text()), ())
    if any(variable != "eps" for variable in residue[0].variables()):
        return Finding(f"the residue of the coupling at {place.text()} depends on the other ratios", ())
    return residue[0]


def _odd_trouble(entry: Rational, roots: Tag, ring: Ring, name: str) -> Finding | None:
    """Whether a coupling with a root has more than simple poles (half-integer ones at branch points)."""
    for place in places_of([entry], ring, name):
        if place.moves:
            return Finding(moving(place.text()), ())
        if place.order(entry.denominator)[0] > 1:
            return Finding(not_fuchsian_root(place.text()), ())
    total = sum(degree(root.numerator, ring, name) for root in roots)
    if growth(entry, name) > -1 - (total + 1) // 2:
        return Finding(not_fuchsian_root(f"{name} = infinity"), ())
    return None


def _independent_values(
    matrices: Mapping[str, Matrix], tags: Sequence[Tag], ring: Ring, prime: int, seed: int
) -> tuple[Matrix, ...]:
    """For each root the couplings at enough points that all linear relations in the ratios are seen."""
    size = len(tags)
    classes: dict[str, list[tuple[int, int]]] = {}
    for i in range(size):
        for j in range(size):
            if tags[i] != tags[j] and any(matrix[i][j] for matrix in matrices.values()):
                classes.setdefault(root_class(tags[i], tags[j]), []).append((i, j))
    random = Random(seed)
    eps = random.randrange(2, prime)
    found: list[Matrix] = []
    for pairs in classes.values():
        rank, idle = 0, 0
        rows: list[list[int]] = []
        for _ in range(_MOST_POINTS):
            if idle > len(matrices) + 1:
                break
            values: dict[str, int] = {name: random.choice(_POINTS) for name in matrices}
            for matrix in matrices.values():
                try:
                    here = {(i, j): matrix[i][j].substitute(values) for i, j in pairs}
                    row = [_modular(here[pair], eps, prime) for pair in pairs]
                except ZeroDivisionError:
                    continue
                trial = flint.nmod_mat(len(rows) + 1, len(pairs), [v for r in (*rows, row) for v in r], prime)
                if trial.rank() == rank:
                    idle += 1
                    continue
                rank, idle, rows = rank + 1, 0, [*rows, row]
                found.append(
                    tuple(tuple(here.get((i, j), ring.zero) for j in range(size)) for i in range(size))
                )
        else:
            raise UnfinishedError(f"{_MOST_POINTS} points do not exhaust the couplings with square roots")
    return tuple(found)


def _modular(value: Rational, eps: int, prime: int) -> int:
    values = [0] * len(value.ring.names)
    values[value.ring.index("eps")] = eps
    return value.modular(values, prime)
