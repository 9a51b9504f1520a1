"""The matrix, constant in x, that factors eps out of a Fuchsian system; and the choice among such matrices.

Any epsilon-form stays one when its functions are combined with rational numbers, or when functions that do
not couple are scaled by separate functions of eps. The choice made here, so that the functions are as pure
as the differential equation can tell:

- in each set of coupled functions the factors of eps that multiply the masters are polynomials in eps
  without common factor (a factor common to a whole set cannot be seen in the differential equation);
- relative to these factors, the admixtures of lower functions have no constant term in eps;
- rational scales are such that each function starts as (primitive polynomial in eps) x (algebraic) x master.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from random import Random

import flint

from ibpred.epsform.blocks import Finding
from ibpred.epsform.form import Matrix
from ibpred.epsform.lattices.intertwine import (
    closure,
    intertwiners,
    modular_number,
    reference_numbers,
    representative,
)
from ibpred.epsform.lattices.pencil import ModularMatrix
from ibpred.epsform.lattices.sampling import Sample, reconstruct_in_eps
from ibpred.epsform.matrices import Constants, inverse, lifted, part, product
from ibpred.epsform.residues.content import content
from ibpred.epsform.residues.decompose import conjugated, constants, exact_matrix
from ibpred.epsform.residues.fuchsian import Fuchsian, Stuck
from ibpred.epsform.roots.tags import Tag
from ibpred.epsform.structure import reachable
from ibpred.errors import UnfinishedError
from ibpred.exact.rational import Rational, Ring


@dataclass(frozen=True)
class Factored:
    """The matrix C and the canonical residues: ``R_l C = eps C A_l``."""

    matrix: Matrix
    residues: Mapping[str, Constants]


def factor_eps(
    system: Fuchsian,
    blocks: Sequence[range],
    diagonal: Sequence[Matrix],
    tags: Sequence[Tag],
    primes: Sequence[int],
    seed: int,
) -> Factored | Stuck:
    """C(eps) with ``C^-1 R_l C = eps A_l``, or the first block of rows that cannot follow.

    Parameters
    ----------
    system
        Fuchsian, block lower triangular.
    blocks
        The rows of each diagonal block.
    diagonal
        For each block the inverse of the change of basis made so far (for the choice of scales).
    tags
        The tag of each row; C connects rows of equal tags only.
    primes, seed
        For the modular samples.
    """
    ring = diagonal[0][0][0].ring
    size = blocks[-1].stop
    eps = ring.variable("eps")
    terms = (*system.residues, *system.odd)
    scaled = [tuple(tuple(e / eps if e else e for e in row) for row in r) for r in terms]
    pattern = [[any(r[i][j] for r in scaled) for j in range(size)] for i in range(size)]
    reach = closure(pattern, blocks)
    support = tuple(tuple(j for j in row if tags[j] == tags[i]) for i, row in enumerate(reach))
    if not scaled:
        unit = tuple(tuple(Fraction(int(i == j)) for j in range(size)) for i in range(size))
        return _chosen(lifted(ring, unit), {}, (), blocks, diagonal, ring)
    filled = [(i, j) for i in range(size) for j in range(size) if pattern[i][j]]

    def images(number: int, prime: int) -> list[ModularMatrix] | None:
        values = [0] * len(ring.names)
        values[ring.index("eps")] = number
        try:
            flat = [[e.modular(values, prime) if e else 0 for row in r for e in row] for r in scaled]
        except ZeroDivisionError:
            return None
        return [flint.nmod_mat(size, size, f, prime) for f in flat]

    reference = _reference(images, blocks, support, primes[0], seed)
    if isinstance(reference, int):
        return Stuck(reference, Finding(_no_constant(), ()))

    def sampler(number: int, prime: int) -> Sample | None:
        left, right = images(number, prime), images(modular_number(reference, prime), prime)
        if left is None or right is None:
            return None
        basis = intertwiners(left, right, blocks, support, seed)
        if isinstance(basis, range):
            return None
        matrix = representative(basis, seed)
        values = [int(matrix[i, j]) for i in range(size) for j in support[i]]
        values += [int(a[place]) for a in right for place in filled]
        return Sample(len(basis), tuple(values))

    rebuilt = reconstruct_in_eps(sampler, primes, seed, ring, "the matrix that factors eps out")
    source = iter(rebuilt.functions)
    rows = [[ring.zero] * size for _ in range(size)]
    for i in range(size):
        for j in support[i]:
            rows[i][j] = next(source)
    tables: list[Constants] = []
    for _ in terms:
        table = [[Fraction(0)] * size for _ in range(size)]
        for i, j in filled:
            table[i][j] = next(source).to_fraction()
        tables.append(tuple(map(tuple, table)))
    residues = {place.text(): table for place, table in zip(system.places, tables, strict=False)}
    odd = tables[len(system.places) :]
    return _chosen(tuple(map(tuple, rows)), residues, odd, blocks, diagonal, ring)


def _no_constant() -> str:
    return (
        "the system is Fuchsian with exponents proportional to eps, but no change of basis that is constant "
        "in the ratios factors eps out of the coupling of these rows to the rows before them"
    )


def _reference(
    images: object, blocks: Sequence[range], support: Sequence[Sequence[int]], prime: int, seed: int
) -> Fraction | int:
    """A reference value of eps that works at random eps, or the block that never does."""
    random = Random(seed)
    failures: list[int] = []
    for number in reference_numbers(()):
        right = images(modular_number(number, prime), prime)  # type: ignore[operator]
        left = images(random.randrange(2, prime), prime)  # type: ignore[operator]
        if left is None or right is None:
            continue
        found = intertwiners(left, right, blocks, support, seed)
        if not isinstance(found, range):
            return number
        failures.append(list(blocks).index(found))
    if not failures:
        raise UnfinishedError("every reference value of eps is a pole of the Fuchsian system")
    return max(failures)


def _chosen(
    matrix: Matrix,
    residues: Mapping[str, Constants],
    odd: Sequence[Constants],
    blocks: Sequence[range],
    diagonal: Sequence[Matrix],
    ring: Ring,
) -> Factored:
    """The choice of scales and admixtures described at the top."""
    size = len(matrix)
    inverses = [inverse(part(matrix, block, block), ring) for block in blocks]
    weights = [
        content((e for row in product(inv, before, ring) for e in row), ring)
        for inv, before in zip(inverses, diagonal, strict=True)
    ]
    tables = (*residues.values(), *odd)
    links = [{j for j in range(size) if j != i and any(a[i][j] for a in tables)} for i in range(size)]
    for i in range(size):
        for j in tuple(links[i]):
            links[j].add(i)
    for block in blocks:
        links[block[0]] |= set(block)
        for i in block:
            links[i].add(block[0])
    together = reachable([sorted(s) for s in links])
    shared = [
        content((weights[k] for k, b in enumerate(blocks) if b[0] in together[block[0]]), ring)
        for block in blocks
    ]
    scale = {j: shared[k] for k, block in enumerate(blocks) for j in block}
    matrix = tuple(tuple(e * scale[j] if e else e for j, e in enumerate(row)) for row in matrix)
    change = _free_of_constants(matrix, blocks, ring)
    signs = _rational_scales(matrix, blocks, diagonal, ring)
    change = tuple(tuple(v * signs[j] for j, v in enumerate(row)) for row in change)
    matrix = product(matrix, lifted(ring, change), ring)
    return Factored(matrix, {text: conjugated(a, change) for text, a in residues.items()})


def _free_of_constants(matrix: Matrix, blocks: Sequence[range], ring: Ring) -> Constants:
    """K such that the admixtures in ``(diagonal of C)^-1 C K`` have no constant term in eps."""
    size = len(matrix)
    rows = []
    for block in blocks:
        inv = inverse(part(matrix, block, block), ring)
        own = product(inv, part(matrix, block, range(size)), ring)
        for i, row in zip(block, own, strict=True):
            rows.append(
                [Fraction(int(i == j)) if j in block else constant_term(e) for j, e in enumerate(row)]
            )
    return constants(exact_matrix(rows).inv())


def _rational_scales(
    matrix: Matrix, blocks: Sequence[range], diagonal: Sequence[Matrix], ring: Ring
) -> list[Fraction]:
    """Factor of each column that makes the row of the inverse primitive, its lowest coefficient positive."""
    scales: list[Fraction] = []
    for block, before in zip(blocks, diagonal, strict=True):
        own = product(inverse(part(matrix, block, block), ring), before, ring)
        for row in own:
            common = content(row, ring)
            top, bottom = common.numerator.content(), common.denominator.content()
            first = next(e for e in row if e)
            sign = 1 if first.numerator.coeffs()[-1] > 0 else -1
            scales.append(Fraction(sign * int(top), int(bottom)))
    return scales


def constant_term(value: Rational) -> Fraction:
    """Coefficient of eps^0 in the Laurent expansion at eps = 0 of a function of eps."""
    if not value:
        return Fraction(0)
    index = value.ring.index("eps")

    def series(polynomial: object) -> list[int]:
        terms = {int(e[index]): int(c) for e, c in polynomial.to_dict().items()}  # type: ignore[attr-defined]
        return [terms.get(k, 0) for k in range(max(terms) + 1)]

    above, below = series(value.numerator), series(value.denominator)
    order = next(k for k, c in enumerate(below) if c)
    below = below[order:]
    quotient: list[Fraction] = []
    for k in range(order + 1):
        rest = Fraction(above[k] if k < len(above) else 0)
        rest -= sum((quotient[k - m] * below[m] for m in range(1, min(k + 1, len(below)))), Fraction(0))
        quotient.append(rest / below[0])
    return quotient[order]
