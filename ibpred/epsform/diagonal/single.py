"""Diagonal blocks of size one: the solution is a product of powers, read off exactly.

Half-integer powers are carried as a tag (see `tags`).
"""

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
from ibpred.epsform.places import Place, constant_residue, places_of
from ibpred.epsform.roots.tags import tag_of
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
    for name, value in values.items():
        ring, total = value.ring, value.ring.zero
        for place in places_of([value], ring, name):
            order, _ = place.order(value.denominator)
            if order > 1:
                return Finding(irregular(place.text()), tuple(exponents))
            residue = constant_residue(value, place)
            if residue is None:
                return Finding(conjugate(place.text()), tuple(exponents))
            exponent = split_exponent(residue)
            if exponent is None:
                return Finding(no_exponent(str(residue), place.text()), tuple(exponents))
            total = total + residue * place.logarithmic()
            if place.text() in found:
                continue
            found[place.text()] = (place, *exponent)
            exponents.append((place.text(), (exponent_text(linear(*exponent)),)))
            if place.moves and exponent[1]:
                return Finding(moving(place.text()), tuple(exponents))
        if value.numerator * total.denominator != total.numerator * value.denominator:
            return Finding(irregular(f"{name} = infinity"), tuple(exponents))
    for place, a, _ in found.values():
        if a.denominator > 2:
            return Finding(fractional(a, place.text()), tuple(exponents))
        if a.denominator == 2 and place.moves:
            return Finding(moving(place.text()), tuple(exponents))
    field = next(iter(values.values())).ring
    factor = field.one
    tagged = []
    for place, a, _ in found.values():
        if a.denominator == 2:
            # the exponent of the rational function g in f = sqrt(tag) g is -1/2
            tagged.append(place.polynomial)
            a += Fraction(1, 2)
        factor = factor * place.element ** int(a)
    residues: dict[str, Constants] = {text: ((b,),) for text, (_, _, b) in found.items() if b}
    return Block(((factor,),), ((1 / factor,),), residues, (tag_of(tagged, field, tuple(values)),))
