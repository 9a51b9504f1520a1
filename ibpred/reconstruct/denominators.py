"""The factors of all denominators over Q, and with which powers each entry has them.

Along a generic line every irreducible factor restricts to a polynomial coprime to the others, so
that once the factors are known, an entry's powers are read off by division. Factors linear in one
variable alone are recognised from their root on a coordinate line. Whatever is left of an entry's
denominator is interpolated from lines through a common point, where its value is normalised to
one (the point need not be the origin: Cuyt, Lee, "Sparse interpolation of multivariate rational
functions", Theor. Comput. Sci. 412 (2011) 1445): the coefficient of t^k is a homogeneous polynomial
of degree k in the direction. The result is lifted to Q, factored, and its factors join the list.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import flint
import numpy as np
from numpy.typing import NDArray

from ibpred.exact.rational import Ring
from ibpred.reconstruct.factors import Factor, factor, products
from ibpred.reconstruct.lift import chinese_remainder, rational_number, rational_vector
from ibpred.reconstruct.modular import (
    lagrange_coefficients,
    matrix_product,
    monomials,
    multiply,
)
from ibpred.reconstruct.probe import Probe
from ibpred.reconstruct.sampling import Draws, InconsistentError, Line, UnluckyPrimeError
from ibpred.reconstruct.support import monomials_within
from ibpred.reconstruct.univariate import SURPLUS, polynomial, rational_functions, strip


@dataclass(frozen=True)
class Structure:
    """What is known of each row before numerators are interpolated.

    Attributes
    ----------
    factors
        The common factors.
    powers
        (rows, factors): power in the denominator, negative for the numerator.
    bounds
        (rows, variables + 1): degrees and total degree of the numerator that remains; total -1
        for the zero function.
    subsets, mixed
        Sets of variables, and (rows, subsets) the degrees in them together, as far as they are known.
    """

    factors: tuple[Factor, ...]
    powers: NDArray[np.int64]
    bounds: NDArray[np.int64]
    subsets: tuple[tuple[int, ...], ...] = ()
    mixed: NDArray[np.int64] | None = None


@dataclass(frozen=True)
class Probes:
    """What all rows look like along lines.

    Attributes
    ----------
    rows
        Entries of the sampler.
    first, second
        Along a random line modulo two primes; the second checks each factor.
    slices
        Along each coordinate, modulo the first prime; coordinate i of slice i is t.
    primes
        Primes for lifting factors with large coefficients, those of the probes in front.
    ring
        Of the black box's variables.
    """

    rows: NDArray[np.int64]
    first: Probe
    second: Probe
    slices: tuple[Probe, ...]
    primes: tuple[int, ...]
    ring: Ring


def structure(draws: Draws, probes: Probes) -> Structure:
    """Find the factors of all denominators and the powers of each row.

    Raises
    ------
    ReconstructionError
        If some denominator cannot be lifted with the primes at hand.
    """
    factors = _linear_factors(probes)
    pencils: dict[int, _Pencil] = {}
    while True:
        powers, rests = _divide(probes.first, factors)
        degrees = np.array([rest.degree() for rest in rests], dtype=np.int64)[probes.first.label]
        open_rows = np.nonzero(degrees > 0)[0]
        if not len(open_rows):
            break
        row = int(open_rows[np.argmin(degrees[open_rows])])
        shape = _open_shape(probes, factors, powers[row], row, int(degrees[row]))
        factors.extend(_unknown_factors(draws, probes, factors, powers[row], shape, pencils))
    bounds = np.stack([piece.degrees()[:, 0] for piece in (*probes.slices, probes.first)], axis=1)
    for k, item in enumerate(factors):
        removed = np.maximum(-powers[:, k], 0)
        bounds[:, :-1] -= removed[:, None] * item.degrees()[None, :]
        bounds[:, -1] -= removed * int(item.polynomial.total_degree())
    return Structure(tuple(factors), powers, bounds)


@dataclass(frozen=True)
class _Shape:
    """Degrees of what is unexplained in one row: of the denominator in all and in each variable,
    and of the numerator without its known factors."""

    row: int
    degree: int
    limits: tuple[int, ...]
    numerator: int


def _open_shape(
    probes: Probes, factors: Sequence[Factor], powers: NDArray[np.int64], row: int, degree: int
) -> _Shape:
    limits = np.array([piece.degrees()[row, 1] for piece in probes.slices], dtype=np.int64)
    numerator = int(probes.first.degrees()[row, 0])
    for item, power in zip(factors, powers, strict=True):
        limits -= max(int(power), 0) * item.degrees()
        numerator += min(int(power), 0) * int(item.polynomial.total_degree())
    return _Shape(row, degree, tuple(int(x) for x in limits), numerator)


def _divide(probe: Probe, factors: Sequence[Factor]) -> tuple[NDArray[np.int64], list[flint.nmod_poly]]:
    """Powers (rows, factors) and, for each label, what remains of the denominator."""
    restricted = [item.restricted(probe.line) for item in factors]
    powers = np.zeros((len(probe.functions), len(factors)), dtype=np.int64)
    rests = []
    known: dict[tuple[int, ...], tuple[list[int], flint.nmod_poly]] = {}
    for label, (numerator, denominator) in enumerate(probe.functions):
        key = tuple(int(c) for c in denominator.coeffs())
        if key not in known:
            rest, counts = denominator, []
            for item in restricted:
                rest, count = strip(rest, item)
                counts.append(count)
            known[key] = (counts, rest)
        counts, rest = known[key]
        powers[label] = counts
        rests.append(rest)
        if numerator.is_zero():
            continue
        for k, item in enumerate(restricted):
            if not counts[k]:
                numerator, count = strip(numerator, item)
                powers[label, k] = -count
    return powers[probe.label], rests


def _divides(item: Factor, power: int, probe: Probe, row: int) -> bool:
    return strip(probe.fraction(row)[1], item.restricted(probe.line), power)[1] == power


def _linear_factors(probes: Probes) -> list[Factor]:
    """Denominator factors a*x + b in one variable x, from rational roots on the coordinate lines."""
    first, second, ring = probes.first, probes.second, probes.ring
    found: list[Factor] = []
    prime = first.line.prime
    for i, piece in enumerate(probes.slices):
        roots: set[int] = set()
        seen: set[tuple[int, ...]] = set()
        generator = ring.context.gens()[i]
        for row, label in enumerate(piece.label):
            rest = piece.functions[label][1]
            key = tuple(int(c) for c in rest.coeffs())
            if key in seen:
                continue
            seen.add(key)
            for root in roots:
                rest, _ = strip(rest, polynomial([prime - root, 1], prime))
            if rest.degree() < 1:
                continue
            for part, _ in rest.factor()[1]:
                if part.degree() != 1:
                    continue
                root = -int(part[0]) * pow(int(part[1]), -1, prime) % prime
                number = rational_number(root, prime)
                if number is None:
                    continue
                candidate = factor(number[1] * generator - number[0], ring)
                if _divides(candidate, 1, first, row) and _divides(candidate, 1, second, row):
                    roots.add(root)
                    found.append(candidate)
    return found


class _Pencil:
    """Lines through one point modulo a prime, in the directions ``start * ratio**j``."""

    def __init__(self, draws: Draws, prime: int) -> None:
        self.prime = prime
        self.base = draws.residues(draws.variables, prime)
        self.start = draws.residues(draws.variables, prime)
        self.ratio = draws.residues(draws.variables, prime)
        self.lines: list[Line] = []

    def sampled(self, draws: Draws, rows: NDArray[np.int64], count: int, samples: int) -> list[Line]:
        while len(self.lines) < count:
            power = np.array([pow(int(g), len(self.lines), self.prime) for g in self.ratio], dtype=np.uint64)
            direction = multiply(self.start, power, self.prime)
            self.lines.append(draws.line(self.base, direction, self.prime, len(rows)))
        for j in range(count):
            self.lines[j] = draws.along(self.lines[j], samples, rows)
        return self.lines[:count]


def _unknown_factors(
    draws: Draws,
    probes: Probes,
    factors: Sequence[Factor],
    powers: NDArray[np.int64],
    shape: _Shape,
    pencils: dict[int, _Pencil],
) -> list[Factor]:
    """Irreducible factors of the unexplained part of one row's denominator."""
    draws.doing = "denominators"
    terms: dict[tuple[int, ...], int] = {}
    modulus = 1
    used = 0
    for prime in probes.primes:
        if prime not in pencils:
            pencils[prime] = _Pencil(draws, prime)
        try:
            image = _rest_modulo(draws, probes, tuple(factors), powers, shape, pencils[prime])
        except UnluckyPrimeError:
            continue
        used += 1
        keys = sorted(set(terms) | set(image))
        lifted = chinese_remainder(
            [terms.get(key, 0) for key in keys], modulus, [image.get(key, 0) for key in keys], prime
        )
        terms, modulus = dict(zip(keys, lifted, strict=True)), modulus * prime
        numbers = rational_vector([terms[key] for key in keys], modulus)
        if numbers is None:
            continue
        poly = probes.ring.polynomial(dict(zip(keys, numbers[0], strict=True)))
        new = [(factor(part, probes.ring), int(power)) for part, power in poly.factor()[1]]
        checks = (probes.first, probes.second)
        if all(_divides(item, power, probe, shape.row) for item, power in new for probe in checks):
            return [item for item, _ in new]
    raise InconsistentError(
        probes.first.line.prime,
        f"part of the denominator of entry {int(probes.rows[shape.row])}, of degree {shape.degree} (per "
        f"variable at most {shape.limits}), was not lifted to rational numbers with {used} primes; "
        "give more primes",
    )


def _rest_modulo(
    draws: Draws,
    probes: Probes,
    factors: tuple[Factor, ...],
    powers: NDArray[np.int64],
    shape: _Shape,
    pencil: _Pencil,
) -> dict[tuple[int, ...], int]:
    """The unexplained part of a denominator modulo a prime, its leading coefficient one."""
    prime, degree = pencil.prime, shape.degree
    layers = [monomials_within(shape.limits, k, lowest=k) for k in range(degree + 1)]
    count = max(len(layer) for layer in layers)
    series = np.zeros((count, degree + 1), dtype=np.uint64)
    samples = shape.numerator + degree + 1 + SURPLUS
    for j, line in enumerate(pencil.sampled(draws, probes.rows, count, samples)):
        known, good = products(factors, powers[None, :], line.points(line.nodes), prime)
        values = multiply(line.values[shape.row][None, :], known, prime)
        (pair,) = rational_functions(line.nodes[good], values[:, good], prime)
        if pair is None or pair[1].degree() != degree or int(pair[1][0]) == 0:
            raise UnluckyPrimeError(prime, samples, int(good.sum()))
        normalised = pair[1] / pair[1][0]
        series[j] = [int(normalised[k]) for k in range(degree + 1)]
    context = flint.nmod_mpoly_ctx.get(probes.ring.names, prime, "degrevlex")
    total = context.from_dict({})
    ratio, start = pencil.ratio[:, None], pencil.start[:, None]
    for k, layer in enumerate(layers):
        if not len(layer):
            continue
        size = len(layer)
        nodes = monomials(layer, ratio, prime)[:, 0]
        solved = matrix_product(lagrange_coefficients(nodes, prime), series[:size, k : k + 1], prime)[:, 0]
        scale = monomials(layer, start, prime)[:, 0]
        terms = {
            tuple(int(e) for e in exponents): int(c) * pow(int(s), -1, prime) % prime
            for exponents, c, s in zip(layer, solved, scale, strict=True)
        }
        total = total + context.from_dict(terms)
    shifts = [g - int(a) for g, a in zip(context.gens(), pencil.base, strict=True)]
    moved = total.compose(*shifts, ctx=context)
    lead = max(tuple(int(e) for e in key) for key in moved.to_dict())
    inverse = pow(int(moved[lead]), -1, prime)
    return {tuple(int(e) for e in key): int(c) * inverse % prime for key, c in moved.to_dict().items()}
