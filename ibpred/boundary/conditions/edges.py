"""Corners of the Euclidean region and the edges between them, with the epsilon-form on each edge.

A corner is an order ``x1 << x2 << ... << 1`` in which the ratios vanish. There ``f ~ prod_i x_i^(eps A_i)
c`` with commuting A_i: c is the boundary vector of the corner. From it one edge leads along the largest
ratio to infinity, the others still vanishing; and for each pair of neighbours one leads, their quotient
growing from 0 to infinity, to the corner with the two exchanged. On an edge the letters are their leading
terms, and the equation is one in a single variable.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Any

import flint

from ibpred.boundary.behaviour.approach import Approach, leading
from ibpred.epsform.form import EpsilonForm
from ibpred.exact.rational import Rational
from ibpred.iterated.alphabet import Alphabet, alphabet_of, is_positive_at, limit
from ibpred.iterated.transport import INFINITY, Point, Residues, point_text, residue_at

Corner = tuple[str, ...]
"""The ratios in the order in which they vanish, the smallest first."""


@dataclass(frozen=True)
class Edge:
    """A curve at the border of the region.

    Attributes
    ----------
    start, end
        The corners at variable 0 and infinity; the end is None where a ratio itself goes to infinity.
    scales
        What tends to zero along the whole edge, the fastest first.
    variable
        Runs from 0 to infinity.
    label
        What the variable is in terms of the ratios, e.g. ``y/x``.
    values
        The ratios in terms of scales and variable.
    residues
        Finite point of the variable -> residue; 0 is always there, and so are points at which only the
        basis is singular (their residue vanishes).
    scale_residues
        For each scale its residue, which commutes with all others.
    nonlinear
        Letters that are not linear in the variable (or not rational in it), as text.
    radicands
        Those of the form in terms of scales and variable.
    """

    start: Corner
    end: Corner | None
    scales: tuple[str, ...]
    variable: str
    label: str
    values: Mapping[str, Rational]
    residues: Residues
    scale_residues: tuple[Any, ...]
    nonlinear: tuple[str, ...]
    radicands: tuple[Rational, ...]

    def approach(self, point: Point) -> Approach:
        """The way to a point of the edge."""
        return Approach(self.scales, self.variable, point)

    def point_text(self, point: Point) -> str:
        """A point of the edge, for messages."""
        where = point_text(point, self.label)
        return f"{where} for {' << '.join((*self.scales, '1'))}" if self.scales else where


def edges_at(form: EpsilonForm, corner: Corner) -> tuple[Edge, ...]:
    """The edges that leave a corner, that of the largest ratio first.

    The quotient of two ratios serves as a variable only if the corner looks the same from there: the letters
    must have the same exponents whether the quotient or the scales vanish first. Edges for which they do not
    are left out, and so are ends.

    Parameters
    ----------
    form
        The epsilon-form.
    corner
        All of its ratios.
    """
    field = form.ring
    alphabet = alphabet_of(form, corner)
    here = _residues(form, corner)
    plain = {name: field.variable(name) for name in corner}
    found = [_edge(form, alphabet, corner, None, corner[:-1], corner[-1], corner[-1], plain)]
    for k in range(len(corner) - 1):
        small, large = corner[k], corner[k + 1]
        values = {**plain, small: field.variable(small) * field.variable(large)}
        scales = (*corner[:k], *corner[k + 1 :])
        swapped = (*corner[:k], large, small, *corner[k + 2 :])
        edge = _edge(form, alphabet, corner, swapped, scales, small, f"{small}/{large}", values)
        at_scale = dict(zip(edge.scales, edge.scale_residues, strict=True))
        if not _fits(here, edge.residues[Fraction(0)], at_scale, small, large):
            continue
        there = _residues(form, swapped) if _is_real(form, swapped) else None
        if there is None or not _fits(there, -residue_at(edge.residues, INFINITY), at_scale, small, large):
            edge = replace(edge, end=None)
        found.append(edge)
    return tuple(found)


def _is_real(form: EpsilonForm, corner: Corner) -> bool:
    return all(is_positive_at(radicand, corner) for radicand in form.radicands)


def _residues(form: EpsilonForm, corner: Corner) -> dict[str, Any]:
    """The matrices A_i of ``prod_i x_i^(eps A_i)`` at a corner."""
    size = len(form.inverse)
    alphabet, found = alphabet_of(form, corner), {}
    for number, name in enumerate(corner, start=1):
        residue, alphabet = limit(alphabet, name, corner[number:])
        found[name] = flint.fmpq_mat(size, size) if residue is None else residue
    return found


def _fits(
    corner: Mapping[str, Any], of_quotient: Any, at_scale: Mapping[str, Any], small: str, large: str
) -> bool:
    """Whether exponents in a quotient ``v = small/large`` and the scales are those of a corner."""
    expected = {name: m for name, m in corner.items() if name != small}
    expected[large] = corner[large] + corner[small]
    return bool(of_quotient == corner[small]) and all(at_scale[n] == m for n, m in expected.items())


def _edge(
    form: EpsilonForm,
    alphabet: Alphabet,
    start: Corner,
    end: Corner | None,
    scales: Sequence[str],
    variable: str,
    label: str,
    values: Mapping[str, Rational],
) -> Edge:
    size = len(form.inverse)
    zero = flint.fmpq_mat(size, size)
    order = (*scales, variable)
    along = alphabet.substituted(values, order)
    totals = []
    for number, scale in enumerate(scales, start=1):
        residue, along = limit(along, scale, order[number:])
        totals.append(zero if residue is None else residue)
    at_zero = limit(along, variable, ())[0]
    by_root: dict[Fraction, Any] = {Fraction(0): zero if at_zero is None else at_zero}
    others: dict[str, Any] = {str(letter): matrix for letter, matrix in along.odd.items()}
    place = form.ring.index(variable)
    for letter, matrix in along.even.items():
        terms = {int(e[place]): int(c) for e, c in letter.numerator.to_dict().items()}
        if max(terms) > 1:
            others[str(letter)] = matrix
        elif terms.get(0, 0):
            by_root[Fraction(-terms[0], terms[1])] = matrix
    residues = {root: matrix for root, matrix in by_root.items() if matrix or root == 0}
    for row in form.inverse:
        for entry in row:
            for root in _linear_roots(entry, values, scales, place):
                residues.setdefault(root, zero)
    radicands = tuple(radicand.substitute(values) for radicand in form.radicands)
    for radicand in radicands:
        for root in _linear_roots(radicand, {}, scales, place):
            residues.setdefault(root, zero)
    return Edge(
        start,
        end,
        tuple(scales),
        variable,
        label,
        dict(values),
        residues,
        tuple(totals),
        tuple(others),
        radicands,
    )


def _linear_roots(
    entry: Rational, values: Mapping[str, Rational], scales: Sequence[str], place: int
) -> list[Fraction]:
    """Rational zeros and poles in the variable of the leading term of a function."""
    if not entry:
        return []
    found = []
    for polynomial, _ in leading(entry.substitute(values), scales)[1].factors()[1]:
        terms = {tuple(int(n) for n in e): int(c) for e, c in polynomial.to_dict().items()}
        powers = {e[place]: c for e, c in terms.items()}
        if len(powers) == len(terms) and max(powers) == 1 and all(sum(e) == e[place] for e in terms):
            found.append(Fraction(-powers.get(0, 0), powers[1]))
    return found
