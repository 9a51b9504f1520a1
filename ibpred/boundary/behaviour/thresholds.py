"""Exponents at thresholds: points at which F vanishes inside the range of its parameters.

Let all coefficients of U and F be ``alpha + beta g`` with alpha, beta >= 0 and one function g of the variable
(``g = -s/m^2`` as a rule). On a path along which Im g keeps its sign, F lies in the cone spanned by 1 and g
and does not vanish: the path stays on the sheet of the Euclidean region. At a real point at its end F may
have negative terms. Where they complete squares, as in ``m^2 (x1 - x2)^2 + (4 m^2 - s) x1 x2``, the range of
the parameters is cut at the zeros of these squares, ``x1 = x2 + x1'`` and ``x2 = x1 + x2'``, and on each part
all terms are positive again: the regions are those of the Newton polytopes of all parts (Jantzen, Smirnov,
Smirnov, arXiv:1206.0546).
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import comb, isqrt

from ibpred.boundary.behaviour.approach import has_root_before, valuation
from ibpred.boundary.behaviour.polytope import lower_facets, separating_functional
from ibpred.exact.rational import Rational

Exponents = tuple[int, ...]
Pair = tuple[Fraction, Fraction]
"""(a, b) for ``a + b eta``, eta a small positive quantity."""

_NOTHING = (Fraction(0), Fraction(0))
_MOST_CUTS = 6  # one inside the other
_CHOICES = 3  # pairs tried at each cut, those that leave the fewest negative terms
_MOST_TRIALS = 400  # cuts in all


@dataclass(frozen=True)
class Monomials:
    """``coefficient prod_i x_i^(a_i - 1)`` in front of a power of U + F.

    Attributes
    ----------
    valuation
        Order of the coefficient in the distance to the point.
    powers
        The a_i.
    raised
        n in ``(U + F)^(-d/2 - n)``.
    """

    valuation: int
    powers: tuple[int, ...]
    raised: int


def threshold_exponents(
    terms: Mapping[Exponents, Rational],
    pieces: Sequence[Monomials],
    dimension: int,
    variable: str,
    point: Fraction,
) -> tuple[tuple[Fraction, Fraction], ...] | None:
    """Exponents of an integral at a negative point, reached from small positive values above the axis.

    Parameters
    ----------
    terms
        U + F, its coefficients in one variable.
    pieces
        What stands in the parametric integral.
    dimension
        d0.
    variable, point
        The variable and where it goes: first half around zero, then along the negative axis.

    Returns
    -------
    tuple or None
        (power, slope) for ``u^(power + slope eps)``, u the distance to the point, one for each region of
        each part; None where the way is not known to be free, or the negative terms are not removed.
    """
    pencil = _pencil(list(terms.values()), variable)
    if pencil is None:
        return None
    g, pairs = pencil
    local = _local(g, variable, point)
    if local is None:
        return None
    end, order = local
    for sign in (1, -1):
        # one side is reached along the axis, the other by a turn on which Im g keeps its sign
        moved = {e: (alpha + beta * end, beta * sign) for e, (alpha, beta) in zip(terms, pairs, strict=True)}
        parts = _positive_parts({e: pair for e, pair in moved.items() if any(pair)}, _MOST_CUTS)
        if parts is not None:
            return tuple(found for part in parts for found in _exponents(part, pieces, dimension, order))
    return None


def is_separated(terms: Mapping[Exponents, Rational], variable: str, point: Fraction) -> bool:
    """Whether no Landau singularity lies at a negative point on the sheet of the Euclidean region.

    If no term of F vanishes there and a linear functional of the exponents separates positive from negative
    terms strictly, F and its scaling derivative along it have no common zero at positive parameters, nor on
    any face; rotating the parameters along it keeps F away from zero.

    Parameters
    ----------
    terms
        F, its coefficients in one variable.
    variable, point
        As for `threshold_exponents`.
    """
    if not any(c.derivative(variable) for c in terms.values()):
        return all(c.to_fraction() > 0 for c in terms.values())
    pencil = _pencil(list(terms.values()), variable)
    local = None if pencil is None else _local(pencil[0], variable, point)
    if pencil is None or local is None:
        return False
    values = {e: a + b * local[0] for e, (a, b) in zip(terms, pencil[1], strict=True)}
    above = [e for e, value in values.items() if value > 0]
    below = [e for e, value in values.items() if value < 0]
    return len(above) + len(below) == len(values) and separating_functional(above, below) is not None


def _pencil(coefficients: Sequence[Rational], variable: str) -> tuple[Rational, list[Pair]] | None:
    """A function g and all coefficients as (alpha, beta) with ``alpha + beta g``, alpha and beta >= 0."""
    first = next((c for c in coefficients if c.derivative(variable)), None)
    if first is None:
        return None
    pairs = []
    for value in coefficients:
        ratio = value.derivative(variable) / first.derivative(variable)
        if not ratio.is_constant():
            return None
        rest = value - first * ratio
        if not rest.is_constant():
            return None
        pairs.append((rest.to_fraction(), ratio.to_fraction()))
    if any(b < 0 or (b == 0 and a < 0) for a, b in pairs):
        return None
    shift = max(-a / b for a, b in pairs if b)
    return first - shift, [(a + b * shift, b) for a, b in pairs]


def _local(g: Rational, variable: str, point: Fraction) -> tuple[Fraction, int] | None:
    """The value of g at the point and the order of ``g - value`` there, where the way to it is free.

    Near zero g must be finite, or ``c x`` or ``c/x``, so that half a turn brings it to the negative axis; on
    the axis it must be monotonic up to the point, so that Im g has one sign just above.
    """
    if valuation(g, variable, Fraction(0)) not in (-1, 0, 1):
        return None
    mirrored = g.derivative(variable).substitute({variable: -g.ring.variable(variable)})
    place = g.ring.index(variable)
    for polynomial, _ in mirrored.factors()[1]:
        powers = {int(e[place]): int(c) for e, c in polynomial.to_dict().items()}
        if has_root_before([powers.get(k, 0) for k in range(max(powers) + 1)], -point):
            return None
    if valuation(g, variable, point) < 0:
        return None
    end = g.substitute({variable: point}).to_fraction()
    return end, valuation(g - end, variable, point)


def _positive_parts(terms: Mapping[Exponents, Pair], cuts: int) -> list[_Part] | None:
    """Cut the range of the parameters until all terms are positive; None where that does not succeed."""
    size = len(next(iter(terms)))
    whole = _Part(dict(terms), tuple((i,) for i in range(size)))
    return _cut(whole, cuts, iter(range(_MOST_TRIALS)))


@dataclass(frozen=True)
class _Part:
    """A part of the range of the parameters.

    Attributes
    ----------
    terms
        U + F in the parameters of the part.
    sums
        Each old parameter as a sum of new ones, up to positive factors.
    """

    terms: Mapping[Exponents, Pair]
    sums: tuple[tuple[int, ...], ...]


def _cut(part: _Part, cuts: int, trials: Iterator[int]) -> list[_Part] | None:
    negative = [e for e, pair in part.terms.items() if _sign(pair) < 0]
    if not negative:
        return [part]
    if not cuts or next(trials, None) is None:
        return None
    candidates = []
    for place, (i, j, ratio) in enumerate(_squares(part.terms, negative)):
        halves = [_shifted(part, i, j, ratio), _shifted(part, j, i, 1 / ratio)]
        left = sorted((sum(_sign(pair) < 0 for pair in half.terms.values()) for half in halves), reverse=True)
        candidates.append((left, place, halves))
    for _, _, halves in sorted(candidates, key=lambda item: item[:2])[:_CHOICES]:
        found: list[_Part] = []
        for half in halves:
            inner = _cut(half, cuts - 1, trials)
            if inner is None:
                break
            found += inner
        else:
            return found
    return None


def _sign(pair: Pair) -> int:
    leading = pair[0] or pair[1]
    return (leading > 0) - (leading < 0)


def _squares(
    terms: Mapping[Exponents, Pair], negative: Sequence[Exponents]
) -> Iterator[tuple[int, int, Fraction]]:
    """Pairs i, j and r to cut at ``x_i = r x_j``, where ``M (a x_i^2 - 2 c x_i x_j + b x_j^2)`` occurs."""
    seen = set()
    others = []
    for exponents in negative:
        inside = [i for i, n in enumerate(exponents) if n]
        for k, i in enumerate(inside):
            for j in inside[k + 1 :]:
                a = terms.get(_moved(exponents, i, j), _NOTHING)[0]
                b = terms.get(_moved(exponents, j, i), _NOTHING)[0]
                c = -terms[exponents][0] / 2
                if a > 0 and b > 0 and c > 0:
                    ratio = _ratio(a, b, c)
                    found = (i, j, ratio)
                    if found not in seen:
                        seen.add(found)
                        if ratio * ratio == b / a:
                            yield found
                        else:
                            others.append(found)
    yield from others


def _ratio(a: Fraction, b: Fraction, c: Fraction) -> Fraction:
    """The zero of a square, else between c/a and b/c: a positive form has positive terms on both sides."""
    root = Fraction(isqrt((b / a).numerator), isqrt((b / a).denominator))
    if root * root == b / a:
        return root
    return _simplest(*sorted((c / a, b / c)))


def _simplest(low: Fraction, high: Fraction) -> Fraction:
    """The fraction of least denominator in a closed interval of positive numbers."""
    whole = -(-low.numerator // low.denominator)
    if whole <= high:
        return Fraction(whole)
    floor = whole - 1
    return floor + 1 / _simplest(1 / (high - floor), 1 / (low - floor))


def _moved(exponents: Exponents, up: int, down: int) -> Exponents:
    changed = list(exponents)
    changed[up] += 1
    changed[down] -= 1
    return tuple(changed)


def _shifted(part: _Part, i: int, j: int, ratio: Fraction) -> _Part:
    """The part ``x_i > ratio x_j``: x_i replaced by ``x_i + ratio x_j``."""
    terms: dict[Exponents, Pair] = {}
    for exponents, (a, b) in part.terms.items():
        for k in range(exponents[i] + 1):
            factor = comb(exponents[i], k) * ratio**k
            changed = list(exponents)
            changed[i] -= k
            changed[j] += k
            key = tuple(changed)
            old = terms.get(key, (Fraction(0), Fraction(0)))
            terms[key] = (old[0] + a * factor, old[1] + b * factor)
    sums = tuple(tuple(dict.fromkeys((*s, j))) if i in s else s for s in part.sums)
    return _Part({e: pair for e, pair in terms.items() if any(pair)}, sums)


def _exponents(
    part: _Part, pieces: Sequence[Monomials], dimension: int, order: int
) -> Iterator[tuple[Fraction, Fraction]]:
    """Power and slope of each region of one part."""
    points = [(e, 0 if a else order) for e, (a, _) in part.terms.items()]
    for facet in lower_facets(points):
        heights = []
        for piece in pieces:
            # x_i^(a_i - 1) is a sum of positive monomials: in each factor the least height counts
            height = piece.valuation - facet.offset * (Fraction(dimension, 2) + piece.raised)
            height += sum(facet.normal, Fraction(0))
            for a, total in zip(piece.powers, part.sums, strict=True):
                height += (a - 1) * min(facet.normal[k] for k in total)
            heights.append(height)
        yield min(heights), facet.offset
