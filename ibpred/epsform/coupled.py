"""Coupled diagonal blocks: Fuchsian form by global sections at numeric eps, then rebuilt in eps."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from random import Random
from typing import Any

import flint

from ibpred.epsform.blocks import Block, Finding
from ibpred.epsform.content import conjugated, content, primitive_columns
from ibpred.epsform.findings import finding
from ibpred.epsform.form import Matrix
from ibpred.epsform.intertwine import intertwiners, representative
from ibpred.epsform.local import Obstacle, Trouble
from ibpred.epsform.matrices import Constants, inverse, lifted, product, scaled
from ibpred.epsform.pencil import ModularMatrix, ModularPolynomial, Pencil, times_constant
from ibpred.epsform.places import Place, places_of
from ibpred.epsform.sampling import Sample, reconstruct_in_eps
from ibpred.epsform.sections import Glued, glue
from ibpred.epsform.verify import canonical_matrix, satisfies
from ibpred.errors import ReconstructionError, UnfinishedError
from ibpred.exact.rational import Polynomial, Rational, Ring

REFERENCE_EPS = (Fraction(1, 7), Fraction(2, 11), Fraction(3, 13), Fraction(5, 17))
"""Numbers mu where the constant matrices ``R_l(mu)/mu`` are taken; the first generic one serves."""
BASE_POINTS = (2, 3, -2, -3, 5, 7, -5, 11, 13, 17)
"""Base points x = O where the change of basis is normalised; the first regular one serves."""
PROBES = 3
"""Samples that must agree on an obstacle before it is believed."""
ATTEMPTS = 60
"""Samples tried to get that many useful ones."""

Terms = tuple[tuple[int, int, int], ...]


@dataclass(frozen=True)
class _Pattern:
    """A block as integer tables, ready for evaluation at (eps, prime)."""

    ring: Ring
    name: str
    numerators: tuple[tuple[Terms, ...], ...]
    denominator: Terms
    places: tuple[Place, ...]
    place_terms: tuple[Terms, ...]


@dataclass
class _Reference:
    """Canonical residues modulo each prime, computed when first needed."""

    eps: Fraction
    base: int
    residues: dict[int, tuple[ModularMatrix, ...] | None] = field(default_factory=dict)


def solve_coupled(
    matrix: Matrix, name: str, primes: Sequence[int], seed: int, subject: str
) -> Block | Finding:
    """Epsilon-form of a coupled diagonal block, or the reason why there is none.

    Parameters
    ----------
    matrix
        The block, over Q(eps, x).
    name
        The variable x.
    primes
        For the modular samples; taken in order, those where the letters split.
    seed
        Of the sample points.
    subject
        For messages.

    Raises
    ------
    ReconstructionError
        If primes or samples do not suffice.
    """
    ring = matrix[0][0].ring
    pattern = _pattern(matrix, ring, name)
    usable = tuple(p for p in primes if _splits(pattern, p))
    if not usable:
        raise ReconstructionError(f"{subject}: the letters split modulo none of the {len(primes)} primes")
    reference = _probe(pattern, usable[0], seed, subject)
    if isinstance(reference, Obstacle):
        return finding(reference, pattern.places, name)
    size = len(matrix)

    def sampler(eps: int, prime: int) -> Sample | None:
        right = _reference_residues(pattern, reference, prime)
        here = _glued(pattern, eps, prime, reference.base)
        if right is None or not isinstance(here, Glued):
            return None
        left = _letter_residues(here, pattern, eps, prime)
        return None if isinstance(left, Obstacle) else _sample(here, left, right, seed)

    rebuilt = reconstruct_in_eps(sampler, usable, seed, ring, subject)
    transformation, residues = _unpacked(rebuilt.shape, rebuilt.functions, pattern, size)
    factor = content((e for row in transformation for e in row), ring)
    transformation = scaled(transformation, 1 / factor)
    change = primitive_columns(transformation, ring)
    transformation = product(transformation, lifted(ring, change), ring)
    residues = {text: conjugated(constants, change) for text, constants in residues.items()}
    logarithms = {p.text(): p.logarithmic() for p in pattern.places}
    canonical = canonical_matrix(residues, logarithms, size, ring)
    if not satisfies(matrix, transformation, canonical, name, ring):
        raise ReconstructionError(
            f"{subject}: the epsilon-form rebuilt from samples fails the exact check; give larger primes"
        )
    return Block(transformation, inverse(transformation, ring), residues)


def _pattern(matrix: Matrix, ring: Ring, name: str) -> _Pattern:
    common = ring.context.constant(1)
    entries = [e for row in matrix for e in row]
    for entry in entries:
        common = common * (entry.denominator / common.gcd(entry.denominator))
    places = places_of(entries, ring, name)
    return _Pattern(
        ring,
        name,
        tuple(
            tuple(_terms(e.numerator * (common / e.denominator), ring, name) for e in row) for row in matrix
        ),
        _terms(common, ring, name),
        places,
        tuple(_terms(p.polynomial, ring, name) for p in places),
    )


def _terms(polynomial: Polynomial, ring: Ring, name: str) -> Terms:
    """(power of eps, power of x, coefficient)."""
    eps, x = ring.index("eps"), ring.index(name)
    found = []
    for exponents, coefficient in polynomial.to_dict().items():
        if sum(map(int, exponents)) != int(exponents[eps]) + int(exponents[x]):
            raise UnfinishedError(f"a coupled block may depend on eps and {name} only")
        found.append((int(exponents[eps]), int(exponents[x]), int(coefficient)))
    return tuple(found)


def _image(terms: Terms, powers: list[int], prime: int) -> ModularPolynomial:
    """A polynomial in x modulo the prime at the eps whose powers are given."""
    values = [0] * (max((x for _, x, _ in terms), default=0) + 1)
    for eps, x, coefficient in terms:
        values[x] += coefficient * powers[eps]
    return flint.nmod_poly([v % prime for v in values], prime)


def _powers(pattern: _Pattern, eps: int, prime: int) -> list[int]:
    tables = [*(t for row in pattern.numerators for t in row), pattern.denominator, *pattern.place_terms]
    top = max((e for table in tables for e, _, _ in table), default=0)
    powers = [1]
    for _ in range(top):
        powers.append(powers[-1] * eps % prime)
    return powers


def _points(pattern: _Pattern, powers: list[int], prime: int) -> list[tuple[int, int]] | None:
    """(index of the place, root) for all roots; None where a place does not split or two meet."""
    found: list[tuple[int, int]] = []
    for index, (place, terms) in enumerate(zip(pattern.places, pattern.place_terms, strict=True)):
        roots = _image(terms, powers, prime).roots()
        if len(roots) != place.degree:
            return None
        found.extend((index, int(root)) for root, _ in sorted((int(r), m) for r, m in roots))
    return found if len({point for _, point in found}) == len(found) else None


def _splits(pattern: _Pattern, prime: int) -> bool:
    """Whether the places that do not move have all their roots modulo the prime."""
    for place, terms in zip(pattern.places, pattern.place_terms, strict=True):
        if not place.moves and len(_image(terms, [1], prime).roots()) != place.degree:
            return False
    return True


def _glued(pattern: _Pattern, eps: int, prime: int, base: int) -> Glued | Obstacle | None:
    powers = _powers(pattern, eps, prime)
    points = _points(pattern, powers, prime)
    if points is None:
        return None
    numerators = tuple(tuple(_image(t, powers, prime) for t in row) for row in pattern.numerators)
    pencil = Pencil(prime, numerators, _image(pattern.denominator, powers, prime))
    if int(pencil.denominator(base % prime)) == 0:
        return None
    return glue(pencil, points, eps, base % prime)


def _letter_residues(
    glued: Glued, pattern: _Pattern, eps: int, prime: int
) -> tuple[ModularMatrix, ...] | Obstacle:
    """``R_l / eps`` for each place; an obstacle if conjugate roots differ or a moving place survives."""
    inverse_eps = pow(eps, -1, prime)
    owners = [i for i, place in enumerate(pattern.places) for _ in range(place.degree)]
    found: dict[int, ModularMatrix] = {}
    zero = flint.nmod_mat(glued.residues[0].nrows(), glued.residues[0].nrows(), prime)
    for owner, residue in zip(owners, glued.residues, strict=True):
        if pattern.places[owner].moves and residue != zero:
            return Obstacle(Trouble.MOVING, owner, (), glued.exponents)
        matrix = residue * inverse_eps
        if owner in found and found[owner] != matrix:
            return Obstacle(Trouble.CONJUGATE, owner, (), glued.exponents)
        found[owner] = matrix
    return tuple(found[i] for i in range(len(pattern.places)))


def _reference_residues(
    pattern: _Pattern, reference: _Reference, prime: int
) -> tuple[ModularMatrix, ...] | None:
    if prime not in reference.residues:
        eps = reference.eps.numerator * pow(reference.eps.denominator, -1, prime) % prime
        here = _glued(pattern, eps, prime, reference.base)
        found = _letter_residues(here, pattern, eps, prime) if isinstance(here, Glued) else None
        reference.residues[prime] = None if isinstance(found, Obstacle) else found
    return reference.residues[prime]


def _probe(pattern: _Pattern, prime: int, seed: int, subject: str) -> _Reference | Obstacle:
    """The reference point, or the obstacle on which several samples agree."""
    random = Random(seed)
    eps = random.randrange(2, prime)
    denominator = _image(pattern.denominator, _powers(pattern, eps, prime), prime)
    base = next((b for b in BASE_POINTS if int(denominator(b % prime))), None)
    if base is None:
        raise UnfinishedError(f"{subject}: no regular base point among {BASE_POINTS}")
    obstacles: list[Obstacle] = []
    useful: list[tuple[int, tuple[ModularMatrix, ...]]] = []
    for _ in range(ATTEMPTS):
        eps = random.randrange(2, prime)
        here = _glued(pattern, eps, prime, base)
        if here is None:
            continue
        found = _letter_residues(here, pattern, eps, prime) if isinstance(here, Glued) else here
        if isinstance(found, Obstacle):
            obstacles.append(found)
            if obstacles.count(found) == PROBES:
                return found
        else:
            useful.append((eps, found))
            if len(useful) == PROBES:
                break
    if len(useful) < PROBES:
        raise UnfinishedError(
            f"{subject}: samples at different eps disagree about its singular points, or its moving poles "
            "rarely have roots modulo the prime; choose masters whose denominators do not mix eps with "
            f"{pattern.name}"
        )
    return _reference(pattern, prime, base, useful, seed, subject)


def _reference(
    pattern: _Pattern,
    prime: int,
    base: int,
    useful: Sequence[tuple[int, tuple[ModularMatrix, ...]]],
    seed: int,
    subject: str,
) -> _Reference | Obstacle:
    size = useful[0][1][0].nrows()
    block = [range(size)]
    support = tuple(tuple(range(size)) for _ in range(size))
    for number in REFERENCE_EPS:
        reference = _Reference(number, base)
        right = _reference_residues(pattern, reference, prime)
        if right is None:
            continue
        for _, left in useful:
            if isinstance(intertwiners(left, right, block, support, seed), range):
                return Obstacle(Trouble.CONSTANT, -1, (), ())
        return reference
    raise UnfinishedError(f"{subject}: every reference value of eps is special")


def _sample(
    here: Glued, left: Sequence[ModularMatrix], right: Sequence[ModularMatrix], seed: int
) -> Sample | None:
    """The entries of T C and the constant residues as a flat list."""
    size = len(here.numerators)
    support = tuple(tuple(range(size)) for _ in range(size))
    basis = intertwiners(left, right, [range(size)], support, seed)
    if isinstance(basis, range):
        return None
    columns = times_constant(here.numerators, representative(basis, seed))
    entries = []
    for entry in (e for row in columns for e in row):
        common = entry.gcd(here.denominator)
        below = here.denominator // common
        lead = below.leading_coefficient()
        entries.append((entry // common / lead, below / lead))
    prime = int(left[0].modulus())
    if len(basis) == 1:
        # the one free factor of eps: fixed where the functions stay simplest
        first = next(c for above, _ in entries for c in above.coeffs() if int(c))
        scale = pow(int(first), -1, prime)
        entries = [(above * scale, below) for above, below in entries]
    values = [int(c) for above, below in entries for c in (*above.coeffs(), *below.coeffs())]
    values += [int(e) for matrix in right for row in matrix.tolist() for e in row]
    shape = tuple((above.degree(), below.degree()) for above, below in entries)
    return Sample(shape, tuple(values))


def _unpacked(
    shape: Any, functions: Sequence[Rational], pattern: _Pattern, size: int
) -> tuple[Matrix, Mapping[str, Constants]]:
    """Back from the flat list: T C, and the residues of the letters that occur."""
    ring = pattern.ring
    x = ring.variable(pattern.name)
    source = iter(functions)

    def polynomial(degree: int) -> Rational:
        total = ring.zero
        for power in range(degree + 1):
            total = total + next(source) * x**power
        return total

    entries = []
    for above, below in shape:
        top = polynomial(above)
        entries.append(top / polynomial(below))
    rows = tuple(tuple(entries[i * size : (i + 1) * size]) for i in range(size))
    residues: dict[str, Constants] = {}
    for place in pattern.places:
        values = [next(source).to_fraction() for _ in range(size * size)]
        if any(values):
            residues[place.text()] = tuple(tuple(values[i * size : (i + 1) * size]) for i in range(size))
    return rows, residues
