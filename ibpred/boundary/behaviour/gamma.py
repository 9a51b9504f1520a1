"""Integrals that are products of Gamma functions.

``I = e^(L eps gamma_E) Gamma(d/2) / (Gamma((L+1) d/2 - sum a_i) prod Gamma(a_i)) int prod dx_i x_i^(a_i - 1)
(U + F)^(-d/2)`` (Lee, Pomeransky, arXiv:1308.6676); the integral over the parameters is done by
`ibpred.boundary.behaviour.parametric`. Lines linear in the loop momenta are no exception.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

from ibpred.boundary.behaviour.parametric import EpsLinear, Terms, parametric_product, plus, times
from ibpred.exact.rational import Rational
from ibpred.family.definition import FamilyDefinition
from ibpred.family.polynomials import symanzik
from ibpred.family.signs import euclidean_signs, positive_signs

__all__ = ["EpsLinear", "GammaForm", "Piece", "closed_forms", "gamma_form", "parametric_form"]


@dataclass(frozen=True)
class GammaForm:
    """``e^(L eps gamma_E) prefactor prod Gamma(numerator) / prod Gamma(denominator) prod scale^exponent``.

    Attributes
    ----------
    loops
        L.
    prefactor
        A rational number.
    numerator, denominator
        Arguments a + b eps of the Gamma functions, as pairs (a, b).
    scales
        (element of the kinematic ring that is positive in the Euclidean region, exponent p + q eps).
    """

    loops: int
    prefactor: Fraction
    numerator: tuple[EpsLinear, ...]
    denominator: tuple[EpsLinear, ...]
    scales: tuple[tuple[Rational, EpsLinear], ...]


@dataclass(frozen=True)
class Piece:
    """``coefficient int prod_i dx_i x_i^(a_i - 1) (U + F)^(-d/2 - n)``, up to Gamma functions.

    Derivatives in the parameters of numerators bring several such pieces.

    Attributes
    ----------
    coefficient
        Depends on the kinematics.
    powers
        The a_i.
    raised
        n; the piece carries ``Gamma(d/2 + n)`` where the integral has ``Gamma(d/2)``.
    """

    coefficient: Rational
    powers: tuple[Fraction, ...]
    raised: int


def gamma_form(family: FamilyDefinition, powers: Sequence[int]) -> GammaForm | None:
    """The closed form of an integral that is a product of Gamma functions.

    Parameters
    ----------
    family
        The family.
    powers
        One power for each line.

    Returns
    -------
    GammaForm or None
        None where the parametric integral is not done direction by direction, where a numerator occurs, where
        no signs of the invariants make all terms of U and F positive, or where the integral is scaleless or
        has no unregulated value.
    """
    sector = tuple(i for i, power in enumerate(powers) if power > 0)
    if not sector or any(power < 0 for power in powers):
        return None
    first, second = symanzik(family)
    mask = sum(1 << i for i in sector)
    terms: dict[tuple[int, ...], Rational] = {}
    for polynomial in (first.restrict(mask), second.restrict(mask)):
        if not polynomial:
            return None
        for exponents, value in polynomial.terms.items():
            terms[tuple(exponents[i] for i in sector)] = value
    # the signs of the whole family are right for all of its sectors, and the same for all
    signs = euclidean_signs(family) or positive_signs(family, set(terms.values()))
    if signs is None:
        return None
    field = family.kinematic_ring
    turned = {name: field.variable(name) * sign for name, sign in signs.items()}
    positive = {exponents: value.substitute(turned) for exponents, value in terms.items()}
    sizes = tuple(Fraction(powers[i]) for i in sector)
    piece = Piece(field.one, sizes, 0)
    found = parametric_form(positive, len(family.loops), family.dimension, sizes, piece)
    if found is None:
        return None
    scales = tuple((scale.substitute(turned), exponent) for scale, exponent in found.scales)
    return GammaForm(found.loops, found.prefactor, found.numerator, found.denominator, scales)


def parametric_form(
    terms: Terms, loops: int, dimension: int, lines: Sequence[Fraction], piece: Piece
) -> GammaForm | None:
    """One piece of an integral with given U + F, or of its leading term in a region.

    Parameters
    ----------
    terms
        U + F or the terms on a facet, all positive.
    loops, dimension
        L and d0.
    lines
        The powers of all lines, negative ones of numerators too.
    piece
        What stands in the parametric integral; its coefficient is left out.
    """
    half = (Fraction(dimension, 2), Fraction(-1))
    exponent = plus(half, (Fraction(piece.raised), Fraction(0)))
    found = parametric_product(terms, exponent, [(power, Fraction(0)) for power in piece.powers])
    if found is None:
        return None
    overall = plus(times(half, loops + 1), (-sum(lines, Fraction(0)), Fraction(0)))
    below = (overall, *((power, Fraction(0)) for power in lines if power > 0))
    numerator, denominator = _cancelled((exponent, *found.numerator), (*found.denominator, *below))
    if any(b == 0 and a.denominator == 1 and a <= 0 for a, b in (*numerator, *denominator)):
        return None
    numbers, scales = _collected(found.scales)
    return GammaForm(loops, found.prefactor * numbers, numerator, denominator, scales)


def _cancelled(
    numerator: Sequence[EpsLinear], denominator: Sequence[EpsLinear]
) -> tuple[tuple[EpsLinear, ...], tuple[EpsLinear, ...]]:
    left = list(numerator)
    kept = []
    for argument in denominator:
        if argument in left:
            left.remove(argument)
        else:
            kept.append(argument)
    one = (Fraction(1), Fraction(0))
    return (
        tuple(sorted(a for a in left if a != one)),
        tuple(sorted(a for a in kept if a != one)),
    )


def _collected(
    scales: Sequence[tuple[Rational, EpsLinear]],
) -> tuple[Fraction, tuple[tuple[Rational, EpsLinear], ...]]:
    """Integer powers of numbers, and all else with the exponents of equal scales added."""
    total: dict[Rational, EpsLinear] = {}
    for scale, exponent in scales:
        total[scale] = plus(total.get(scale, (Fraction(0), Fraction(0))), exponent)
    number = Fraction(1)
    kept = []
    for scale, (p, q) in total.items():
        if scale.is_constant() and p.denominator == 1:
            number *= scale.to_fraction() ** int(p)
            p = Fraction(0)
        if (p or q) and not scale.is_one():
            kept.append((scale, (p, q)))
    return number, tuple(sorted(kept, key=lambda item: str(item[0])))


def closed_forms(family: FamilyDefinition, masters: Sequence[Sequence[int]]) -> tuple[GammaForm | None, ...]:
    """The closed form of each master, None where there is none of this kind."""
    return tuple(gamma_form(family, powers) for powers in masters)
