"""Diagonal blocks of size one: the solution is a product of powers, read off exactly."""

from __future__ import annotations

from collections.abc import Mapping
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


def solve_single(values: Mapping[str, Rational]) -> Block | Finding:
    """Epsilon-form of ``dI = sum_x values[x] dx I``.

    Parameters
    ----------
    values
        For each ratio the coefficient, an element of Q(eps, ratios); integrable.
    """
    found: dict[str, tuple[Place, Fraction, Fraction]] = {}
    exponents: list[tuple[str, tuple[str, ...]]] = []
    at_infinity = Fraction(0)
    for name, value in values.items():
        ring, rest = value.ring, value
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
            rest = rest - residue[0] * place.logarithmic()
            if place.text() in found:
                continue
            found[place.text()] = (place, *exponent)
            exponents.append((place.text(), (exponent_text(linear(*exponent)),)))
            at_infinity -= place.degree * exponent[0]
            if place.moves and exponent[1]:
                return Finding(moving(place.text()), tuple(exponents))
        if rest:
            return Finding(irregular(f"{name} = infinity"), tuple(exponents))
    fractions = [(a, place) for place, a, _ in found.values() if a.denominator > 1]
    if fractions:
        worst, place = max(fractions, key=lambda item: item[0].denominator)
        branch = _branch_points(fractions, at_infinity) if len(values) == 1 else ()
        return Finding(fractional(worst, place.text()), tuple(exponents), branch)
    factor = next(iter(values.values())).ring.one
    for place, a, _ in found.values():
        factor = factor * place.element ** int(a)
    residues: dict[str, Constants] = {text: ((b,),) for text, (_, _, b) in found.items() if b}
    return Block(((factor,),), ((1 / factor,),), residues)


def _branch_points(
    fractions: list[tuple[Fraction, Place]], at_infinity: Fraction
) -> tuple[Fraction | None, ...]:
    """The branch points if all roots are square roots at fixed rational points."""
    if any(a.denominator > 2 or p.root is None for a, p in fractions):
        return ()
    points: list[Fraction | None] = [p.root for _, p in fractions]
    if at_infinity.denominator > 1:
        points.append(None)
    return tuple(points)
