"""The square roots that the functions of one coupled block carry, each with its own sections.

In ``sqrt(P) I`` the functions with the tag P are rational, and a function with another tag has half-integer
exponents wherever its root differs from sqrt(P). With all exponents shifted to ``-1 < a <= 0`` the local
lattices therefore glue to ``O^n + sum O(-m/2)``, n the number of functions with the tag P and m >= 2 the
number of branch points of the quotient of the roots: the global sections are just the functions with the tag
P, and nothing is assumed about the curve on which the roots are single-valued.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import combinations
from math import ceil
from random import Random

import flint

from ibpred.epsform.blocks import Exponent
from ibpred.epsform.form import Connection
from ibpred.epsform.lattices.image import Pattern, block_pattern, pencil_at, splits
from ibpred.epsform.lattices.local import ObstacleError, normalised
from ibpred.epsform.lattices.pencil import (
    ModularPolynomial,
    PolynomialMatrix,
    at_infinity,
    kernel,
    times_constant,
    unit_frame,
)
from ibpred.epsform.lattices.probe import ATTEMPTS, BASE_POINTS
from ibpred.epsform.lattices.sections import global_sections, polynomial_product
from ibpred.epsform.lattices.spectrum import Slopes
from ibpred.epsform.matrices import added, identity, scaled
from ibpred.epsform.places import degree
from ibpred.epsform.roots.tags import Tag

_MOST_ROOTS = 8
"""Letters with half-integer exponents up to which all products of them are tried."""


@dataclass(frozen=True)
class Character:
    """A root and the functions that carry it.

    Attributes
    ----------
    tag
        Letters in the variable whose product is under the root; empty for none.
    pattern
        The system of ``sqrt(tag) I``.
    rows
        As many masters as functions carry the root: their coefficients at the base point form the unit
        matrix, which fixes the basis.
    """

    tag: Tag
    pattern: Pattern
    rows: tuple[int, ...]


@dataclass(frozen=True)
class Characters:
    """All roots of a block.

    Attributes
    ----------
    base
        The base point x = O.
    slopes
        Of the exponents at all points.
    found
        The roots.
    """

    base: int
    slopes: Slopes
    found: tuple[Character, ...]


@dataclass(frozen=True)
class Sections:
    """Functions without a root at numeric parameters.

    Attributes
    ----------
    numerators, denominator
        A column of coefficients for each function.
    slopes
        Of the exponents at all points.
    """

    numerators: PolynomialMatrix
    denominator: ModularPolynomial
    slopes: Slopes

    @property
    def count(self) -> int:
        """Number of functions."""
        return len(self.numerators[0])


def times_root(block: Connection, tag: Tag) -> Connection:
    """The system of ``sqrt(tag) I``."""
    matrices = {}
    for name, matrix in block.matrices.items():
        log = sum((factor.derivative(name) / factor for factor in tag), block.ring.zero) / 2
        matrices[name] = added(matrix, scaled(identity(block.ring, len(matrix)), log))
    return Connection(block.variables, block.ring, matrices, block.blocks, block.labels)


def rational_sections(
    pattern: Pattern, values: Sequence[int], prime: int, slopes: Slopes | None
) -> Sections | None:
    """The functions without a root at numeric parameters, eps first; None where the sample is useless.

    Parameters
    ----------
    slopes
        Those of the exponents, where they are known already.
    """
    image = pencil_at(pattern, values, prime)
    if image is None:
        return None
    pencil, points = image
    frame = unit_frame(pencil.size, prime)
    exponents: list[Exponent] = []
    try:
        for _, point in points:
            pencil, frame, found = normalised(pencil, frame, point, values[0], slopes, ceil)
            exponents += found
        start = unit_frame(pencil.size, prime)
        _, infinity, found = normalised(at_infinity(pencil), start, 0, values[0], slopes, ceil)
    except ObstacleError:
        return None
    seen = frozenset(e.slopes for e in (*exponents, *found))
    sections = global_sections(infinity, 0)
    if not sections:
        return Sections(tuple(() for _ in frame.numerators), frame.denominator, seen)
    columns = polynomial_product(frame.numerators, tuple(zip(*sections, strict=True)))
    return Sections(columns, frame.denominator, seen)


def normal_columns(
    character: Character, values: Sequence[int], prime: int, block: Characters
) -> tuple[PolynomialMatrix, ModularPolynomial] | None:
    """The columns of one root, in the basis fixed at the base point; None where the sample is useless."""
    found = rational_sections(character.pattern, values, prime, block.slopes)
    if found is None or found.count != len(character.rows):
        return None
    size, base = len(character.rows), block.base % prime
    scale = int(found.denominator(base))
    at_base = [int(e(base)) for i in character.rows for e in found.numerators[i]]
    matrix = flint.nmod_mat(size, size, at_base, prime)
    if scale == 0 or matrix.rank() < size:
        return None
    return times_constant(found.numerators, matrix.inv() * scale), found.denominator


def characters(
    block: Connection, name: str, roots: Tag, primes: Sequence[int], seed: int
) -> Characters | None:
    """The roots that the functions of a block carry, as far as they depend on one variable.

    Parameters
    ----------
    block
        A coupled block.
    name
        The variable.
    roots
        Letters that may occur under roots.
    primes, seed
        For samples at random parameters.

    Returns
    -------
    characters or None
        None where the functions with such roots do not make up the block.
    """
    here = tuple(root for root in roots if degree(root.numerator, root.ring, name))
    if len(here) > _MOST_ROOTS:
        return None
    size, random = len(block.labels), Random(seed)
    plain = block_pattern(block.matrices[name], block.ring, name)
    prime = next((p for p in primes if splits(plain, p)), None)
    if prime is None:
        return None
    for _ in range(ATTEMPTS):
        values = [random.randrange(2, prime) for _ in plain.parameters]
        image = pencil_at(plain, values, prime)
        if image is None:
            continue
        base = next((b for b in BASE_POINTS if int(image[0].denominator(b % prime))), None)
        if base is None:
            return None
        found, left = [], size
        slopes: Slopes | None = None
        for tag in _products(here):
            pattern = block_pattern(times_root(block, tag).matrices[name], block.ring, name)
            sections = rational_sections(pattern, values, prime, slopes)
            if sections is None:
                break
            slopes = sections.slopes if slopes is None else slopes | sections.slopes
            if sections.count:
                rows = _pivots(sections.numerators, base % prime, prime)
                if len(rows) < sections.count:
                    break
                found.append(Character(tag, pattern, rows))
                left -= sections.count
            if left <= 0:
                return Characters(base, slopes, tuple(found)) if left == 0 else None
        else:
            return None
    return None


def _products(roots: Tag) -> Iterator[Tag]:
    """All sets of letters, no root first, then the most and the fewest letters in turn."""
    yield ()
    sizes = sorted(range(1, len(roots) + 1), key=lambda n: (min(n, len(roots) - n), -n))
    for size in sizes:
        yield from combinations(roots, size)


def _pivots(columns: PolynomialMatrix, base: int, prime: int) -> tuple[int, ...]:
    """The first rows that are independent at the base point."""
    chosen: list[int] = []
    values: list[list[int]] = []
    for i, row in enumerate(columns):
        trial = [*values, [int(e(base)) for e in row]]
        matrix = flint.nmod_mat(len(trial), len(row), [v for r in trial for v in r], prime)
        if not kernel(matrix.transpose()):
            values = trial
            chosen.append(i)
    return tuple(chosen)
