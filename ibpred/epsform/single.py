"""Diagonal blocks of size one: the solution is a product of powers, read off exactly."""

from __future__ import annotations

from fractions import Fraction

from ibpred.epsform.blocks import (
    Block,
    Finding,
    conjugate,
    exponent_text,
    fractional,
    irregular,
    linear,
    moving,
    no_exponent,
    split_exponent,
)
from ibpred.epsform.matrices import Constants
from ibpred.epsform.places import Place, places_of
from ibpred.exact.rational import Rational


def solve_single(value: Rational, name: str) -> Block | Finding:
    """Epsilon-form of ``I' = value I``.

    Parameters
    ----------
    value
        The coefficient, an element of Q(eps, x).
    name
        The variable x.
    """
    ring = value.ring
    factor, rest = ring.one, value
    residues: dict[str, Constants] = {}
    exponents: list[tuple[str, tuple[str, ...]]] = []
    fractions: list[tuple[Fraction, Place]] = []
    at_infinity = Fraction(0)
    for place in places_of([value], ring, name):
        order, _ = place.order(value.denominator)
        if order > 1:
            return Finding(irregular(place.text()), tuple(exponents))
        residue = place.divide(place.principal(value, 1), place.slope())
        if any(residue[1:]):
            return Finding(conjugate(place.text()), tuple(exponents))
        exponent = split_exponent(residue[0])
        if exponent is None:
            return Finding(no_exponent(str(residue[0]), place.text()), tuple(exponents))
        exponents.append((place.text(), (exponent_text(linear(*exponent)),)))
        if place.moves and exponent[1]:
            return Finding(moving(place.text()), tuple(exponents))
        rest = rest - residue[0] * place.logarithmic()
        at_infinity -= place.degree * exponent[0]
        if exponent[0].denominator > 1:
            fractions.append((exponent[0], place))
            continue
        factor = factor * place.element ** int(exponent[0])
        if exponent[1]:
            residues[place.text()] = ((exponent[1],),)
    if rest:
        return Finding(irregular(f"{name} = infinity"), tuple(exponents))
    if fractions:
        worst, place = max(fractions, key=lambda item: item[0].denominator)
        branch = _branch_points(fractions, at_infinity)
        return Finding(fractional(worst, place.text()), tuple(exponents), branch)
    return Block(((factor,),), ((1 / factor,),), residues)


def _branch_points(
    fractions: list[tuple[Fraction, Place]], at_infinity: Fraction
) -> tuple[Fraction | None, ...]:
    """The branch points if all roots are square roots at fixed rational points."""
    if any(a.denominator > 2 or p.moves or p.degree > 1 for a, p in fractions):
        return ()
    points: list[Fraction | None] = [p.root for _, p in fractions]
    if at_infinity.denominator > 1:
        points.append(None)
    return tuple(points)
