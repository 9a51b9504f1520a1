"""A canonical system with square roots along a curve of kinematics, and its local series.

On the curve ``r_a(x)^2 = q_a(x)`` for the radicands q_a; an odd letter has
``dlog = prod_a r_a(x) N(x)/D(x) dx``. The roots are carried along with the functions: inside a disc without
zeros of q_a the factors ``(1 - h/d)`` of ``q_a(c + h)/q_a(c)`` have positive real part, which fixes the
branch.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import flint

from ibpred.balls.context import Ball, complex_ball, precision
from ibpred.errors import PrecisionError
from ibpred.exact.rational import Rational
from ibpred.iterated.alphabet import Alphabet
from ibpred.numerics.forms.canonical import CanonicalSystem, Letter, SparseRows, sparse_rows
from ibpred.numerics.forms.centre import Centre, centre_with_kernels
from ibpred.numerics.forms.root_kernels import Kernel, shifted

Coefficients = tuple[int, ...]
"""Integer coefficients of a polynomial in the variable of the curve, constant term first."""

Point = tuple[Fraction, Fraction]
"""Real and imaginary part."""

_X: Coefficients = (0, 1)


@dataclass(frozen=True)
class Radicand:
    """``q = content prod p^m`` on the curve."""

    content: Fraction
    factors: tuple[tuple[Coefficients, int], ...]

    def order(self) -> int:
        """Order of vanishing at x = 0."""
        return dict(self.factors).get(_X, 0)

    def value(self, at: Ball, bits: int, without_zero: bool = False) -> Ball:
        """Its value; without the power of x where asked."""
        total = complex_ball(self.content, 0, bits)
        for numbers, power in self.factors:
            if not (without_zero and numbers == _X):
                total = total * _at(numbers, at) ** power
        return total


@dataclass(frozen=True)
class OddKernel:
    """``prod_a r_a content N / prod p^m`` dx, with its matrix.

    Attributes
    ----------
    roots
        The a's.
    content, numerator, factors
        The rational function; numerator and denominator without common factors.
    rows
        The matrix.
    """

    roots: tuple[int, ...]
    content: Fraction
    numerator: Coefficients
    factors: tuple[tuple[Coefficients, int], ...]
    rows: SparseRows


@dataclass(frozen=True)
class RootedSystem:
    """``df = eps (sum_l A_l dlog l + sum_m A'_m dlog(odd letter m)) f`` on a curve.

    Attributes
    ----------
    even
        The part without roots.
    odd
        The rest.
    radicands
        Those of the form, on the curve.
    """

    even: CanonicalSystem
    odd: tuple[OddKernel, ...]
    radicands: tuple[Radicand, ...]

    def needs_cover(self) -> bool:
        """Whether a root branches at x = 0."""
        return any(radicand.order() % 2 for radicand in self.radicands)

    def covered(self) -> RootedSystem:
        """The same in w with ``x = w^2``."""
        letters = []
        for letter in self.even.letters:
            rows = _doubled(letter.rows) if letter.coefficients == _X else letter.rows
            letters.append(Letter(_squared(letter.coefficients), rows))
        odd = tuple(
            OddKernel(
                kernel.roots,
                kernel.content * 2,
                (0, *_squared_whole(kernel.numerator)),
                _squared_factors(kernel.factors),
                kernel.rows,
            )
            for kernel in self.odd
        )
        radicands = tuple(Radicand(q.content, _squared_factors(q.factors)) for q in self.radicands)
        return RootedSystem(CanonicalSystem(self.even.size, tuple(letters)), odd, radicands)

    def singular(self) -> tuple[Coefficients, ...]:
        """Polynomials whose zeros the discs must not hold, x itself left out."""
        found = [letter.coefficients for letter in self.even.letters]
        found += [p for kernel in self.odd for p, _ in kernel.factors]
        found += [p for radicand in self.radicands for p, _ in radicand.factors]
        return tuple(p for p in dict.fromkeys(found) if p != _X)


def _squared_whole(numbers: Coefficients) -> Coefficients:
    """p(w^2)."""
    found = [0] * (2 * len(numbers) - 1)
    found[::2] = numbers
    return tuple(found)


def _squared(numbers: Coefficients) -> Coefficients:
    """p(w^2), and w for x."""
    return _X if numbers == _X else _squared_whole(numbers)


def _squared_factors(factors: Sequence[tuple[Coefficients, int]]) -> tuple[tuple[Coefficients, int], ...]:
    return tuple((_squared(p), 2 * m if p == _X else m) for p, m in factors)


def _doubled(rows: SparseRows) -> SparseRows:
    return tuple((i, tuple((j, 2 * v) for j, v in entries)) for i, entries in rows)


def rooted_system(
    alphabet: Alphabet, radicands: Sequence[Rational], size: int, name: str, images: Mapping[str, Rational]
) -> RootedSystem:
    """The system on a curve.

    Parameters
    ----------
    alphabet, radicands
        Letters and radicands, as they are where some ratios have gone to zero.
    size
        Number of functions.
    name
        The variable of the curve.
    images
        The ratios on the curve, over a field that holds that variable and nothing else but eps.
    """
    found: dict[Coefficients, Any] = {}
    for letter, matrix in alphabet.even.items():
        for numbers, power in _factored(letter.substitute(images), name)[1]:
            more = matrix * power
            found[numbers] = found[numbers] + more if numbers in found else more
    letters = [Letter(numbers, _sparse(matrix)) for numbers, matrix in sorted(found.items())]
    odd = []
    for rooted, matrix in alphabet.odd.items():
        first, square = rooted.polynomial.substitute(images), rooted.square.substitute(images)
        norm = first * first - square
        top = square * first.derivative(name) * 2 - first * square.derivative(name)
        whole = top / (square * norm * rooted.factor.substitute(images))
        if not whole:
            continue
        content, factors = _factored(whole, name)
        numerator: Any = flint.fmpz_poly([1])
        for numbers, power in factors:
            if power > 0:
                numerator = numerator * flint.fmpz_poly(list(numbers)) ** power
        below = tuple((numbers, -power) for numbers, power in factors if power < 0)
        odd.append(
            OddKernel(
                rooted.roots, content, tuple(int(c) for c in numerator.coeffs()), below, _sparse(matrix)
            )
        )
    return RootedSystem(
        CanonicalSystem(size, tuple(letter for letter in letters if letter.rows)),
        tuple(odd),
        tuple(Radicand(*_factored(q.substitute(images), name)) for q in radicands),
    )


def _factored(value: Rational, name: str) -> tuple[Fraction, tuple[tuple[Coefficients, int], ...]]:
    content, factors = value.factors()
    place = value.ring.index(name)
    found = []
    for polynomial, power in factors:
        terms = {int(e[place]): int(c) for e, c in polynomial.to_dict().items()}
        found.append((tuple(terms.get(k, 0) for k in range(max(terms) + 1)), power))
    return content, tuple(found)


def _sparse(matrix: Any) -> SparseRows:
    return sparse_rows([[Fraction(int(v.p), int(v.q)) for v in row] for row in matrix.tolist()])


def _at(numbers: Coefficients, at: Ball) -> Ball:
    total = flint.acb(0)
    for coefficient in reversed(numbers):
        total = total * at + coefficient
    return total


def centre_of(system: RootedSystem, point: Point, roots: Sequence[Ball], bits: int) -> Centre:
    """A centre for the local series.

    Parameters
    ----------
    system
        The system.
    point
        A regular point, or 0.
    roots
        The roots there; at 0 the coefficients of ``x^(order/2)``, orders being even.
    bits
        Working precision.
    """
    base = not any(point)
    with precision(bits):
        at = complex_ball(*point, bits)
        residues: list[SparseRows] = []
        places = []
        for letter in system.even.letters:
            if base and letter.coefficients == _X:
                residues.append(letter.rows)
            else:
                places += [(root - at, letter.rows) for root in letter.roots(bits)]
        kernels = []
        for odd in system.odd:
            kernel = _kernel(odd, system.radicands, at, base, roots, bits)
            whole = _whole_number(kernel.constant())
            if whole:
                residues.append(tuple((i, tuple((j, whole * v) for j, v in e)) for i, e in odd.rows))
            kernels.append((kernel, odd.rows))
    return centre_with_kernels(system.even.size, residues, places, kernels, bits)


def _kernel(
    odd: OddKernel, radicands: Sequence[Radicand], at: Ball, base: bool, roots: Sequence[Ball], bits: int
) -> Kernel:
    exponents: dict[Coefficients, Fraction] = {}
    front = complex_ball(odd.content, 0, bits)
    for a in odd.roots:
        front = front * roots[a]
        for numbers, power in radicands[a].factors:
            exponents[numbers] = exponents.get(numbers, Fraction(0)) + Fraction(power, 2)
    for numbers, power in odd.factors:
        exponents[numbers] = exponents.get(numbers, Fraction(0)) - power
        if not (base and numbers == _X):
            front = front / _at(numbers, at) ** power
    height = Fraction(1)
    numerator = odd.numerator
    if base:
        height += exponents.pop(_X, Fraction(0))
        while not numerator[0]:
            numerator, height = numerator[1:], height + 1
    if height.denominator > 1 or height < 0:
        raise PrecisionError(f"a letter with a root has a power {height - 1} at the base point: no logarithm")
    factors = []
    for numbers, exponent in exponents.items():
        if exponent:
            factors += [(1 / (root - at), exponent) for root in Letter(numbers, ()).roots(bits)]
    return Kernel(front, int(height), shifted(numerator, at, bits), tuple(factors))


def _whole_number(value: Ball) -> int:
    """The integer in a ball that is known to hold one: the order of vanishing of a letter."""
    found = value.real.unique_fmpz()
    if found is None or not value.imag.contains(0):
        raise PrecisionError("the order of a letter with a root is not seen; raise the working precision")
    return int(found)


def roots_after(
    system: RootedSystem, point: Point, roots: Sequence[Ball], end: Point, bits: int
) -> tuple[Ball, ...]:
    """The roots at a point in the disc of a centre, from those at the centre (see `centre_of`).

    Raises
    ------
    PrecisionError
        If the point is not in the disc, or a branch cannot be told.
    """
    base = not any(point)
    found = []
    with precision(bits):
        start, goal = complex_ball(*point, bits), complex_ball(*end, bits)
        for radicand, root in zip(system.radicands, roots, strict=True):
            value = root * goal ** (radicand.order() // 2) if base else root
            for numbers, power in radicand.factors:
                if base and numbers == _X:
                    continue
                for zero in Letter(numbers, ()).roots(bits):
                    ratio = (goal - start) / (zero - start)
                    if not ratio.abs_upper() < 1:
                        raise PrecisionError(
                            "a root is followed beyond its disc; raise the working precision"
                        )
                    value = value * (1 - ratio).sqrt() ** power
            exact = radicand.value(goal, bits).sqrt()
            near = [choice for choice in (exact, -exact) if value.overlaps(choice)]
            if len(near) != 1:
                raise PrecisionError("the branch of a root cannot be told; raise the working precision")
            found.append(near[0])
    return tuple(found)
