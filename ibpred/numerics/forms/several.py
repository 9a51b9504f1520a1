"""Canonical functions of several ratios, from the boundary vector at a corner to any point.

At the corner ``x1 << x2 << ... -> 0+`` the functions are ``f ~ prod_i x_i^(eps A_i) c``. In the region of
positive ratios they are reached one ratio after the other, the largest first: while the smaller ones vanish,
the letters are their leading terms, so each leg is an equation in a single variable. From the positive point
with the same moduli a straight line leads to ratios of other signs, past the singular points on the side
that i0 dictates.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from itertools import pairwise
from typing import Any

import flint

from ibpred.balls.context import complex_ball, precision
from ibpred.boundary.behaviour.approach import leading
from ibpred.epsform.form import EpsilonForm
from ibpred.errors import PointError
from ibpred.exact.rational import Rational
from ibpred.numerics.forms.canonical import CanonicalSystem, Letter, Orders, sparse_rows
from ibpred.numerics.forms.centre import Place, centre_at
from ibpred.numerics.forms.continuation import evaluate_canonical
from ibpred.numerics.forms.path import Target, turns_one_way
from ibpred.numerics.forms.series import carried
from ibpred.numerics.forms.stations import Ratios, by_a_station
from ibpred.numerics.laurent.crossings import along_line, approximate_roots, around, coefficients, crossings


def evaluate_several(
    form: EpsilonForm, corner: Sequence[str], constants: Orders, targets: Mapping[str, Target], bits: int
) -> Orders:
    """The canonical functions at a point.

    Parameters
    ----------
    form
        In several ratios, without square roots.
    corner
        The ratios, the smallest first.
    constants
        Boundary constants at the corner, ``constants[k][i]`` the coefficient of eps^k of c_i.
    targets
        The ratios on their sheets; all half turns go in one direction.
    bits
        Working precision.

    Raises
    ------
    PointError
        If a letter vanishes at the point, or half turns in both directions meet.
    """
    refuse_singular_point(form, targets)
    turns = turns_one_way(targets)

    def way(point: Ratios) -> Orders:
        values = constants
        for k in reversed(range(len(corner))):
            fixed = {name: point[name] for name in corner[k + 1 :]}
            system = leg_system(form, corner[:k], corner[k], fixed)
            values = evaluate_canonical(system, values, Target(point[corner[k]], 0), bits)
        return values

    moduli = {name: target.modulus for name, target in targets.items()}
    start, values = by_a_station(form.letters, moduli, way)
    end = {name: target.value for name, target in targets.items()}
    return values if start == end else along(form, start, end, turns, values, bits)


def refuse_singular_point(form: EpsilonForm, targets: Mapping[str, Target]) -> None:
    """Refuse a point where a letter vanishes.

    Raises
    ------
    PointError
        Naming the letter.
    """
    values: dict[str, Any] = {name: target.value for name, target in targets.items()}
    for letter in form.letters:
        if not letter.substitute({**values, "eps": 0}):
            place = ", ".join(f"{name} = {value}" for name, value in values.items())
            raise PointError(
                f"the point {place} lies on a singularity: the letter {letter} vanishes there; choose "
                "another point"
            )


def leg_system(
    form: EpsilonForm, vanishing: Sequence[str], variable: str, fixed: Mapping[str, Fraction]
) -> CanonicalSystem:
    """The system in one ratio while some ratios vanish, the first fastest, and the others are fixed."""
    place = form.ring.index(variable)
    found: dict[tuple[int, ...], Any] = {}
    for letter, rows in zip(form.letters, form.matrices, strict=True):
        _, last = leading(letter, vanishing)
        for polynomial, multiplicity in last.substitute(dict(fixed)).factors()[1]:
            terms = {int(e[place]): int(c) for e, c in polynomial.to_dict().items()}
            numbers = tuple(terms.get(k, 0) for k in range(max(terms) + 1))
            _add(found, numbers, rows, multiplicity)
    return _system(len(form.transformation), found)


def line_system(
    form: EpsilonForm, start: Mapping[str, Fraction], end: Mapping[str, Fraction]
) -> CanonicalSystem:
    """The system along ``start + x (end - start)``."""
    found: dict[tuple[int, ...], Any] = {}
    for letter, rows in zip(form.letters, form.matrices, strict=True):
        polynomial = flint.fmpz_poly(list(coefficients(along_line(letter, start, end))))
        for factor, multiplicity in polynomial.factor()[1]:
            _add(found, tuple(int(c) for c in factor.coeffs()), rows, int(multiplicity))
    return _system(len(form.transformation), found)


def _add(
    found: dict[tuple[int, ...], Any],
    numbers: tuple[int, ...],
    rows: Sequence[Sequence[Fraction]],
    multiplicity: int,
) -> None:
    matrix = [[multiplicity * value for value in row] for row in rows]
    if numbers in found:
        before = found[numbers]
        matrix = [[a + b for a, b in zip(*lines, strict=True)] for lines in zip(before, matrix, strict=True)]
    found[numbers] = matrix


def _system(size: int, found: Mapping[tuple[int, ...], Any]) -> CanonicalSystem:
    letters = [Letter(numbers, sparse_rows(matrix)) for numbers, matrix in sorted(found.items())]
    return CanonicalSystem(size, tuple(letter for letter in letters if letter.rows))


def along(
    form: EpsilonForm,
    start: Mapping[str, Fraction],
    end: Mapping[str, Fraction],
    turns: Mapping[str, int],
    values: Orders,
    bits: int,
) -> Orders:
    """Carry the functions along a straight line, past its singular points on the side that i0 dictates.

    Parameters
    ----------
    start, end
        Two regular points.
    turns
        For every ratio the sign of the imaginary part that i0 gives it, or 0.
    values
        The functions at the start.
    """
    system = line_system(form, start, end)
    letters: list[Rational] = list(form.letters)
    passed = crossings(letters, start, end, turns)
    path = around(approximate_roots([letter.coefficients for letter in system.letters]), passed)
    nowhere = flint.acb(0)
    for here, there in pairwise(path):
        centre = centre_at(system, complex_ball(*here, bits), None, bits)
        with precision(bits):
            step = complex_ball(*there, bits) - complex_ball(*here, bits)
        values = carried(centre, Place(flint.acb(0), nowhere), values, Place(step, nowhere), bits)
    return values
