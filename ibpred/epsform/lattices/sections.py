"""Global sections of the bundle of local lattices: the decision on a rational epsilon-form.

The lattices at the singular points glue to a vector bundle on the projective line. The system has a
Fuchsian form with exponents proportional to eps exactly if this bundle is trivial (Lee, Pomeransky,
arXiv:1707.07856), and a basis of its global sections is the change of basis.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

import flint

from ibpred.epsform.blocks import Exponent
from ibpred.epsform.lattices.local import Obstacle, ObstacleError, Trouble, normalised, residue_at
from ibpred.epsform.lattices.pencil import (
    Frame,
    ModularMatrix,
    ModularPolynomial,
    Pencil,
    PolynomialMatrix,
    at_infinity,
    kernel,
    times_constant,
    unit_frame,
)
from ibpred.epsform.lattices.spectrum import Slopes


@dataclass(frozen=True)
class Glued:
    """The Fuchsian form at one sample.

    Attributes
    ----------
    numerators, denominator
        The change of basis T, equal to one at the base point.
    residues
        Residue at each point, in the order of the points given.
    exponents
        (index of the place, exponents before the shifts), infinity as -1.
    """

    numerators: PolynomialMatrix
    denominator: ModularPolynomial
    residues: tuple[ModularMatrix, ...]
    exponents: tuple[tuple[int, tuple[Exponent, ...]], ...]


def glue(
    pencil: Pencil, points: Sequence[tuple[int, int]], eps: int, slopes: Slopes | None, base: int
) -> Glued | Obstacle | None:
    """Fuchsian form with exponents proportional to eps, normalised to one at a base point.

    Parameters
    ----------
    pencil
        The system at the numeric `eps`.
    points
        (index of the place, finite point) for each pole.
    slopes
        Slopes to expect where eps is a given number, None where it is random.
    base
        A regular point.

    Returns
    -------
    outcome
        None where the sample happens to be useless (the base point is special for this eps).
    """
    exponents: list[tuple[int, tuple[Exponent, ...]]] = []
    current = -1
    frame = unit_frame(pencil.size, pencil.prime)
    try:
        for current, point in points:
            pencil, frame, found = normalised(pencil, frame, point, eps, slopes)
            exponents.append((current, found))
        current = -1
        infinity = at_infinity(pencil)
        start = unit_frame(pencil.size, pencil.prime)
        _, frame_inf, found = normalised(infinity, start, 0, eps, slopes)
        exponents.append((current, found))
    except ObstacleError as met:
        return Obstacle(met.trouble, current, met.detail, tuple(exponents))
    for place, found in exponents:
        fractions = [e.shift for e in found if e.shift.denominator > 1]
        if fractions:
            simplest = min(fractions, key=lambda a: (abs(a), a))
            return Obstacle(Trouble.FRACTION, place, (simplest,), tuple(exponents))
    sections = global_sections(frame_inf, 0)
    size, prime = pencil.size, pencil.prime
    at_base = [int(e(base)) for g in sections for e in g]
    if len(sections) != size or flint.nmod_mat(size, size, at_base, prime).rank() < size:
        # n sections that are dependent at one point are dependent everywhere, or vanish somewhere:
        # both happen only for a nontrivial bundle, since its degree is zero
        kind = tuple(map(Fraction, splitting_type(frame_inf)))
        return Obstacle(Trouble.BUNDLE, -1, kind, tuple(exponents))
    gluing = tuple(zip(*sections, strict=True))
    numerators = polynomial_product(frame.numerators, gluing)
    scale = int(frame.denominator(base))
    whole = flint.nmod_mat(size, size, [int(e(base)) for row in numerators for e in row], prime)
    if scale == 0 or whole.rank() < size:
        return None
    normal = whole.inv() * scale
    residues = []
    for _, point in points:
        local = flint.nmod_mat(size, size, [int(e(point)) for row in gluing for e in row], prime)
        if local.rank() < size:
            raise AssertionError("sections of a trivial bundle must be independent everywhere")
        change = local * normal
        residues.append(change.inv() * residue_at(pencil, point) * change)
    return Glued(times_constant(numerators, normal), frame.denominator, tuple(residues), tuple(exponents))


def global_sections(frame: Frame, twist: int) -> list[tuple[ModularPolynomial, ...]]:
    """Polynomial vectors g(x) that the lattice at infinity allows to grow like ``x^twist``.

    Parameters
    ----------
    frame
        Basis at infinity in y = 1/x; its denominators are powers of y.
    twist
        An integer; 0 for the sections of the bundle itself.

    Returns
    -------
    sections
        A basis over F_p.
    """
    prime, size = frame.prime, len(frame.numerators)
    below = frame.inverse_denominator.degree()
    # g = T_inf h with h of order >= -twist: this bounds the degree of g
    lowest = min(_valuation(e) for row in frame.numerators for e in row if e)
    highest = frame.denominator.degree() - lowest + twist
    if highest < 0:
        return []
    rows: list[list[int]] = []
    table = [[e.coeffs() for e in row] for row in frame.inverse_numerators]
    longest = max(len(c) for row in table for c in row)
    for power in range(-highest - below, -twist):
        # coefficient of y^power in the inverse times sum_d g_d y^-d
        for row in table:
            values = []
            for d in range(highest + 1):
                place = power + below + d
                for entry in row:
                    values.append(int(entry[place]) if 0 <= place < min(len(entry), longest) else 0)
            if any(values):
                rows.append(values)
    unknowns = size * (highest + 1)
    if not rows:
        vectors = [[int(i == j) for j in range(unknowns)] for i in range(unknowns)]
    else:
        vectors = kernel(flint.nmod_mat(len(rows), unknowns, [e for r in rows for e in r], prime))
    return [
        tuple(flint.nmod_poly([v[d * size + i] for d in range(highest + 1)], prime) for i in range(size))
        for v in vectors
    ]


def splitting_type(frame: Frame) -> tuple[int, ...]:
    """Degrees d_i of the bundle O(d_1) + ... + O(d_n), descending (Grothendieck).

    The second difference of the number of sections of the bundle twisted by k counts the i with
    ``d_i = -k``.
    """
    size = len(frame.numerators)
    counts = {0: len(global_sections(frame, 0))}
    low = 0
    while counts[low]:
        low -= 1
        counts[low] = len(global_sections(frame, low))
    degrees: list[int] = []
    twist, before, last = low + 1, 0, 0
    while len(degrees) < size:
        here = counts[twist] if twist in counts else len(global_sections(frame, twist))
        degrees.extend([-twist] * (here - 2 * last + before))
        before, last, twist = last, here, twist + 1
    return tuple(degrees)


def _valuation(polynomial: ModularPolynomial) -> int:
    return next(i for i, c in enumerate(polynomial.coeffs()) if int(c))


def polynomial_product(left: PolynomialMatrix, right: PolynomialMatrix) -> PolynomialMatrix:
    """Product of two matrices."""
    columns = tuple(zip(*right, strict=True))
    found = []
    for row in left:
        new = []
        for column in columns:
            total = row[0] * column[0]
            for a, b in zip(row[1:], column[1:], strict=True):
                if a and b:
                    total = total + a * b
            new.append(total)
        found.append(tuple(new))
    return tuple(found)
