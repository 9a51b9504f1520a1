"""The system ``f' = A(x) f`` with A over Q(x), and its changes of variable.

Entries are reduced fractions of polynomials over Q; everything here is exact.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import flint

from ibpred.diffeq.system import DifferentialSystem
from ibpred.errors import PointError
from ibpred.exact.rational import Polynomial, Rational

Univariate = Any
"""A polynomial over Q, ``flint.fmpq_poly``."""

Entry = tuple[Univariate, Univariate]
"""Numerator and denominator, coprime, the denominator monic."""


@dataclass(frozen=True)
class RationalSystem:
    """``f' = A(x) f``.

    Attributes
    ----------
    size
        Number of functions.
    entries
        The nonzero entries of A by (row, column).
    """

    size: int
    entries: Mapping[tuple[int, int], Entry]


def fmpq(value: Fraction | int) -> Any:
    """A rational number for FLINT."""
    exact = Fraction(value)
    return flint.fmpq(exact.numerator, exact.denominator)


def fraction(value: Any) -> Fraction:
    """A rational number of FLINT for Python."""
    exact = flint.fmpq(value)
    return Fraction(int(exact.p), int(exact.q))


def reduced_entry(numerator: Univariate, denominator: Univariate) -> Entry:
    """The fraction in lowest terms with a monic denominator."""
    common = numerator.gcd(denominator)
    if common.degree() > 0:
        numerator, denominator = numerator // common, denominator // common
    lead = denominator.leading_coefficient()
    return numerator / lead, denominator / lead


def rational_system(size: int, entries: Iterable[tuple[int, int, Univariate, Univariate]]) -> RationalSystem:
    """A system from (row, column, numerator, denominator); repeated places are added."""
    found: dict[tuple[int, int], Entry] = {}
    for row, column, numerator, denominator in entries:
        top, bottom = flint.fmpq_poly(numerator), flint.fmpq_poly(denominator)
        if (row, column) in found:
            p, q = found[row, column]
            top, bottom = top * q + p * bottom, bottom * q
        if top.is_zero():
            found.pop((row, column), None)
        else:
            found[row, column] = reduced_entry(top, bottom)
    return RationalSystem(size, found)


def univariate(polynomial: Polynomial, images: Sequence[Univariate]) -> Univariate:
    """Substitute univariate polynomials for the variables of an integer polynomial."""
    total = flint.fmpq_poly([])
    powers: dict[tuple[int, int], Univariate] = {}
    for exponents, coefficient in polynomial.to_dict().items():
        term = flint.fmpq_poly([coefficient])
        for place, exponent in enumerate(exponents):
            e = int(exponent)
            if e:
                if (place, e) not in powers:
                    powers[place, e] = images[place] ** e
                term = term * powers[place, e]
        total = total + term
    return total


def system_in(
    size: int, matrix: Iterable[tuple[int, int, Rational]], images: Mapping[str, Univariate]
) -> RationalSystem:
    """The system of a sparse matrix whose variables become polynomials of one variable.

    Parameters
    ----------
    size
        Number of functions.
    matrix
        (row, column, value).
    images
        For every variable of the ring a polynomial (a constant for d and for numbers).

    Raises
    ------
    PointError
        If a denominator vanishes identically.
    """
    entries = []
    for row, column, value in matrix:
        places = [images[name] for name in value.ring.names]
        bottom = univariate(value.denominator, places)
        if bottom.is_zero():
            raise PointError(f"the differential system is singular there: {value.denominator} vanishes")
        entries.append((row, column, univariate(value.numerator, places), bottom))
    return rational_system(size, entries)


def system_on_line(
    system: DifferentialSystem, start: Mapping[str, Fraction], end: Mapping[str, Fraction], eps: Fraction
) -> RationalSystem:
    """The differential equations along ``start + x (end - start)``, at a fixed eps.

    Parameters
    ----------
    system
        The differential equations in all invariants.
    start, end
        Two kinematic points: the whole segment is singular if a letter vanishes on all of it.
    eps
        A rational number.

    Raises
    ------
    PointError
        If a value is missing, or the line lies on a singularity.
    """
    missing = [name for name in system.variables if name not in start or name not in end]
    if missing:
        raise PointError(f"the line lacks a value for {', '.join(missing)}; give every invariant")
    images = {"d": flint.fmpq_poly([fmpq(system.dimension - 2 * eps)])}
    for name in system.variables:
        images[name] = flint.fmpq_poly([fmpq(start[name]), fmpq(end[name] - start[name])])
    parts: list[tuple[int, int, Univariate, Univariate]] = []
    for name in system.variables:
        speed = fmpq(end[name] - start[name])
        if speed:
            along = system_in(len(system.masters), system.matrices.get(name, ()), images)
            parts += [(i, j, p * speed, q) for (i, j), (p, q) in along.entries.items()]
    return rational_system(len(system.masters), parts)


def shifted(system: RationalSystem, centre: Fraction | int) -> RationalSystem:
    """The system in ``h = x - centre``."""
    move = flint.fmpq_poly([fmpq(centre), 1])
    return RationalSystem(system.size, {at: (p(move), q(move)) for at, (p, q) in system.entries.items()})


def inverted(system: RationalSystem) -> RationalSystem:
    """The system in ``z = 1/x``: ``df/dz = -A(1/z)/z^2 f``."""
    found: dict[tuple[int, int], Entry] = {}
    for at, (p, q) in system.entries.items():
        top, bottom = _reversed(-p), _reversed(q)
        power = q.degree() - p.degree() - 2
        if power >= 0:
            top = top.left_shift(power)
        else:
            bottom = bottom.left_shift(-power)
        found[at] = reduced_entry(top, bottom)
    return RationalSystem(system.size, found)


def adjoint(system: RationalSystem) -> RationalSystem:
    """The system of the row vectors g with g f constant: ``g' = -A^T g``."""
    return RationalSystem(system.size, {(j, i): (-p, q) for (i, j), (p, q) in system.entries.items()})


def _reversed(polynomial: Univariate) -> Univariate:
    return flint.fmpq_poly(list(reversed(polynomial.coeffs())))


def valuation(polynomial: Univariate) -> int:
    """Order of vanishing at zero of a nonzero polynomial."""
    return next(i for i, c in enumerate(polynomial.coeffs()) if c != 0)


def entry_valuation(entry: Entry) -> int:
    """Order of vanishing at zero of a nonzero fraction."""
    return valuation(entry[0]) - valuation(entry[1])
