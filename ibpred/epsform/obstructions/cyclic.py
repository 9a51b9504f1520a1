"""The Picard-Fuchs operator of a block from the function that its bundle singles out.

A section r of the dual bundle gives the function ``psi = r . I``, as regular at every finite point as the
exponents allow. The sections that decay fastest at infinity belong to the operator of lowest degree, with
no singular points but true ones. Where there are several, those are taken whose singular part vanishes at
the points with a single exponent that is no integer (as periods do at a conifold point).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import flint

from ibpred.epsform.diagonal.entries import reduced_entries
from ibpred.epsform.form import Matrix
from ibpred.epsform.lattices.image import Pattern, pencil_at, splits
from ibpred.epsform.lattices.local import ObstacleError, normalised, residue_at
from ibpred.epsform.lattices.pencil import (
    Frame,
    ModularPolynomial,
    Pencil,
    PolynomialMatrix,
    at_infinity,
    column_space,
    kernel,
    transposed,
    unit_frame,
)
from ibpred.epsform.lattices.sampling import Sample, reconstruct_in_eps
from ibpred.epsform.lattices.sections import global_sections
from ibpred.epsform.matrices import dot
from ibpred.epsform.obstructions.operators import Operator, operator
from ibpred.errors import ReconstructionError
from ibpred.exact.rational import Rational

_MOST_TWIST = 12


def section_at(pattern: Pattern, eps: int, prime: int) -> tuple[PolynomialMatrix, ModularPolynomial] | None:
    """The singled-out function at numeric eps: numerators (one row) and denominator of its coefficients."""
    image = pencil_at(pattern, (eps,), prime)
    if image is None:
        return None
    pencil, points = image
    frame = unit_frame(pencil.size, prime)
    try:
        for _, point in points:
            pencil, frame, _ = normalised(pencil, frame, point, eps, None)
        start = unit_frame(pencil.size, prime)
        _, infinity, _ = normalised(at_infinity(pencil), start, 0, eps, None)
    except ObstacleError:
        return None
    dual = Frame(
        prime,
        transposed(infinity.inverse_numerators),
        infinity.inverse_denominator,
        transposed(infinity.numerators),
        infinity.denominator,
    )
    for twist in range(-_MOST_TWIST, _MOST_TWIST + 1):
        sections = global_sections(dual, twist)
        if len(sections) > 1:
            sections = _without_singular_part(sections, pencil, [point for _, point in points])
            if len(sections) > 1:
                return None
        if sections:
            row = [
                sum((a * b for a, b in zip(sections[0], column, strict=True)), flint.nmod_poly([], prime))
                for column in zip(*frame.inverse_numerators, strict=True)
            ]
            return (tuple(row),), frame.inverse_denominator
    return None


def _without_singular_part(
    sections: Sequence[Sequence[ModularPolynomial]], pencil: Pencil, points: Sequence[int]
) -> list[tuple[ModularPolynomial, ...]]:
    """Combinations of sections that annihilate the image of each residue of rank one."""
    prime = pencil.prime
    rows: list[list[int]] = []
    for point in points:
        image = column_space(residue_at(pencil, point))
        if len(image) == 1:
            rows.append(
                [sum(int(e(point)) * v for e, v in zip(g, image[0], strict=True)) % prime for g in sections]
            )
    if not rows:
        return [tuple(g) for g in sections]
    matrix = flint.nmod_mat(len(rows), len(sections), [v for row in rows for v in row], prime)
    found = []
    for vector in kernel(matrix):
        total = [flint.nmod_poly([], prime)] * pencil.size
        for factor, section in zip(vector, sections, strict=True):
            total = [a + b * factor for a, b in zip(total, section, strict=True)]
        found.append(tuple(total))
    return found


def operator_at(
    pencil: Pencil, row: Sequence[ModularPolynomial], below: ModularPolynomial
) -> list[ModularPolynomial] | None:
    """Coefficients of the operator of ``row . I / below`` modulo the prime, coprime polynomials."""
    prime, size = pencil.prime, pencil.size
    n, d = pencil.numerators, pencil.denominator
    # v = numerators / (below^(k+1) d^k): v' + v A over one more factor of each
    chain = [list(row)]
    b = below
    for k in range(size):
        v = chain[-1]
        slope = (b.derivative() * d) * (k + 1) + (b * d.derivative()) * k
        new = []
        for j in range(size):
            total = v[j].derivative() * b * d - v[j] * slope
            for i in range(size):
                if v[i] and n[i][j]:
                    total = total + v[i] * n[i][j] * b
            new.append(total)
        chain.append(new)
    # all rows over the same denominator below^(n+1) d^n
    rows = [[e * (b * d) ** (size - k) for e in v] for k, v in enumerate(chain)]
    relation = _relation(rows, prime)
    if relation is None:
        return None
    common = relation[0]
    for entry in relation[1:]:
        common = common.gcd(entry)
    relation = [entry // common for entry in relation]
    scale = relation[-1].leading_coefficient()
    return [entry / scale for entry in relation]


def _relation(rows: Sequence[Sequence[ModularPolynomial]], prime: int) -> list[ModularPolynomial] | None:
    """Polynomials r_k with ``sum_k r_k rows[k] = 0``: maximal minors, by fraction-free expansion."""
    size = len(rows) - 1
    minors = []
    for skip in range(size + 1):
        minor = _determinant([list(r) for k, r in enumerate(rows) if k != skip], prime)
        minors.append(minor * (-1) ** (size - skip))
    return minors if minors[-1] else None


def _determinant(rows: list[list[ModularPolynomial]], prime: int) -> ModularPolynomial:
    """Bareiss elimination."""
    size, sign = len(rows), 1
    last: ModularPolynomial = flint.nmod_poly([1], prime)
    for k in range(size - 1):
        pivot = next((i for i in range(k, size) if rows[i][k]), None)
        if pivot is None:
            return flint.nmod_poly([], prime)
        if pivot != k:
            rows[k], rows[pivot] = rows[pivot], rows[k]
            sign = -sign
        for i in range(k + 1, size):
            for j in range(k + 1, size):
                rows[i][j] = (rows[i][j] * rows[k][k] - rows[i][k] * rows[k][j]) // last
        last = rows[k][k]
    return rows[-1][-1] * sign


@dataclass(frozen=True)
class Cyclic:
    """A function of a block and its differential equation for generic eps.

    Attributes
    ----------
    row
        ``psi = sum_i row[i] I_i``.
    operator
        It annihilates psi; the leading coefficient is monic in x.
    """

    row: tuple[Rational, ...]
    operator: Operator

    @property
    def at_zero(self) -> Operator:
        """The operator at eps = 0."""
        return operator([c.substitute({"eps": 0}) for c in self.operator.coefficients], self.operator.name)


def cyclic_function(pattern: Pattern, primes: Sequence[int], seed: int, subject: str) -> Cyclic | None:
    """The singled-out function and its operator.

    Parameters
    ----------
    pattern
        A block in one ratio.
    primes, seed
        For the modular samples.
    subject
        For messages.

    Returns
    -------
    function or None
        None where no function is singled out, or the samples do not determine it.
    """
    usable = tuple(p for p in primes if splits(pattern, p))

    def sampler(eps: int, prime: int) -> Sample | None:
        section = section_at(pattern, eps, prime)
        image = pencil_at(pattern, (eps,), prime)
        if section is None or image is None:
            return None
        found = operator_at(image[0], section[0][0], section[1])
        if found is None:
            return None
        entries = reduced_entries(section[0], section[1])
        # the free factor of eps
        scale = next(above for above, _ in entries if above).leading_coefficient()
        row = [part for above, below in entries for part in (above / scale, below)]
        shape = tuple(entry.degree() for entry in (*row, *found))
        return Sample(shape, tuple(int(c) for entry in (*row, *found) for c in entry.coeffs()))

    if not usable or len(pattern.parameters) != 1:
        return None
    try:
        rebuilt = reconstruct_in_eps(sampler, usable, seed, pattern.ring, subject)
    except ReconstructionError:
        return None
    source = iter(rebuilt.functions)
    x = pattern.ring.variable(pattern.name)
    values: list[Rational] = []
    degrees = rebuilt.shape
    assert isinstance(degrees, tuple)
    for degree in degrees:
        total = pattern.ring.zero
        for power in range(degree + 1):
            total = total + next(source) * x**power
        values.append(total)
    size = len(pattern.numerators)
    row = tuple(values[2 * i] / values[2 * i + 1] for i in range(size))
    return Cyclic(row, Operator(tuple(values[2 * size :]), pattern.name))


def annihilates(found: Cyclic, matrix: Matrix) -> bool:
    """Whether the operator annihilates the function, exactly, for a block with the given matrix."""
    ring, name = found.operator.ring, found.operator.name
    columns = tuple(zip(*matrix, strict=True))
    row = found.row
    total = [ring.zero] * len(row)
    for c in found.operator.coefficients:
        total = [a + c * b for a, b in zip(total, row, strict=True)]
        row = tuple(
            e.derivative(name) + dot(ring, row, column) for e, column in zip(row, columns, strict=True)
        )
    return not any(total)
