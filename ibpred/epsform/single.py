"""Diagonal blocks of size one: the solution is a product of powers, read off exactly."""

from __future__ import annotations

from fractions import Fraction

from ibpred.epsform.blocks import (
    Block,
    Finding,
    exponent_text,
    fractional,
    irregular,
    linear,
    moving,
    no_exponent,
    split_exponent,
)
from ibpred.epsform.matrices import Constants
from ibpred.epsform.places import places_of
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
    for place in places_of([value], ring, name):
        order, _ = place.order(value.denominator)
        if order > 1:
            return Finding(irregular(place.text()), tuple(exponents))
        residue = place.divide(place.principal(value, 1), place.slope())
        if any(residue[1:]):
            return Finding(_conjugate(place.text()), tuple(exponents))
        exponent = split_exponent(residue[0])
        if exponent is None:
            return Finding(no_exponent(str(residue[0]), place.text()), tuple(exponents))
        exponents.append((place.text(), (exponent_text(linear(*exponent)),)))
        problem = _check(exponent, place.text(), place.moves)
        if problem:
            return Finding(problem, tuple(exponents))
        factor = factor * place.element ** int(exponent[0])
        rest = rest - residue[0] * place.logarithmic()
        if exponent[1]:
            residues[place.text()] = ((exponent[1],),)
    if rest:
        return Finding(irregular(f"{name} = infinity"), tuple(exponents))
    return Block(((factor,),), ((1 / factor,),), residues)


def _check(exponent: tuple[Fraction, Fraction], point: str, moves: bool) -> str | None:
    if exponent[0].denominator != 1:
        return fractional(exponent[0], point)
    return moving(point) if moves and exponent[1] else None


def _conjugate(point: str) -> str:
    return (
        f"the roots of {point} have different residues, so a square root of the discriminant is needed: "
        "such letters are not supported yet"
    )
