"""Canonical functions with square roots, from the boundary vector at a corner to any point.

The way is that of `ibpred.numerics.forms.several`: one ratio after the other through the region of positive
ratios, then a straight line past the singular points on the side that i0 dictates. The roots are carried
along, so that what comes out are the functions divided by their roots, ``g_i = f_i/sqrt(tag_i)``, single-
valued where the masters are.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import pairwise
from math import isqrt

import flint

from ibpred.balls.context import Ball, complex_ball, precision
from ibpred.epsform.form import EpsilonForm
from ibpred.errors import PointError, PrecisionError
from ibpred.exact.rational import Rational, ring
from ibpred.iterated.alphabet import Alphabet, alphabet_of, letters_with_roots, limit, lowest
from ibpred.numerics.forms.canonical import Orders
from ibpred.numerics.forms.centre import Place
from ibpred.numerics.forms.path import Target, turns_one_way
from ibpred.numerics.forms.rooted import Point, RootedSystem, centre_of, rooted_system, roots_after
from ibpred.numerics.forms.series import carried, from_base
from ibpred.numerics.forms.stations import Ratios, by_a_station
from ibpred.numerics.frobenius.path import planned
from ibpred.numerics.laurent.crossings import approximate_roots, around, crossings

_CURVE = ring(("eps", "x"))
_FIRST_STEP = 0.5  # in radii of convergence
_LAST_STEP = 0.7
_ZERO: Point = (Fraction(0), Fraction(0))


@dataclass(frozen=True)
class Carried:
    """Functions and roots at a point."""

    values: Orders
    roots: tuple[Ball, ...]


def evaluate_rooted(
    form: EpsilonForm, corner: Sequence[str], constants: Orders, targets: Mapping[str, Target], bits: int
) -> Orders:
    """The canonical functions divided by their roots, ``(D f)_i``, at a point.

    Parameters
    ----------
    form
        In any number of ratios.
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
        If a letter or a radicand vanishes at the point or on the way there, or half turns in both
        directions meet.
    PrecisionError
        If the working precision does not suffice.
    """
    letters = singular_polynomials(form)
    refuse_zero(letters, {name: target.value for name, target in targets.items()})
    turns = turns_one_way(targets)
    levels = _levels(form, corner)
    moduli = {name: target.modulus for name, target in targets.items()}
    start, here = by_a_station(
        letters,
        moduli,
        lambda point: _through_positive_ratios(form, corner, levels, constants, point, bits),
    )
    end = {name: target.value for name, target in targets.items()}
    if start != end:
        x = _CURVE.variable("x")
        images = {name: x * (end[name] - start[name]) + start[name] for name in end}
        line = _system(form, levels, 0, images)
        path = around(approximate_roots(line.singular()), crossings(letters, start, end, turns))
        here = _along_path(line, here, path, bits)
    return _divided(form, here, bits)


Levels = tuple[Sequence[Alphabet], Sequence[tuple[Rational, ...]]]
"""Alphabets with the first 0, 1, ... ratios of a corner at zero, and radicands with the first 0, ..., all."""


def _through_positive_ratios(
    form: EpsilonForm, corner: Sequence[str], levels: Levels, constants: Orders, point: Ratios, bits: int
) -> Carried:
    """From the corner to a positive point."""
    with precision(bits):
        roots = tuple(complex_ball(q.to_fraction(), 0, bits).sqrt() for q in levels[1][-1])
    here = Carried(constants, roots)
    for k in reversed(range(len(corner))):
        images = {name: _CURVE.constant(point[name]) for name in corner[k + 1 :]}
        images[corner[k]] = _CURVE.variable("x")
        here = _along_axis(_system(form, levels, k, images), here, point[corner[k]], bits)
    return here


def _system(form: EpsilonForm, levels: Levels, level: int, images: Mapping[str, Rational]) -> RootedSystem:
    """The system on a curve, some ratios at zero."""
    complete = {name: images.get(name, _CURVE.zero) for name in form.ring.names}
    return rooted_system(levels[0][level], levels[1][level], len(form.inverse), "x", complete)


def _levels(form: EpsilonForm, corner: Sequence[str]) -> Levels:
    alphabets = [alphabet_of(form, corner)]
    radicands = [form.radicands]
    for number, name in enumerate(corner, start=1):
        alphabets.append(limit(alphabets[-1], name, corner[number:])[1])
        radicands.append(tuple(lowest(q, name)[1] for q in radicands[-1]))
    return alphabets, radicands


def singular_polynomials(form: EpsilonForm) -> tuple[Rational, ...]:
    """Irreducible polynomials at whose zeros a letter or a root is singular."""
    found: list[Rational] = list(form.letters)
    values = list(form.radicands)
    for odd in letters_with_roots(form):
        values += [1 / kernel for name in form.variables if (kernel := odd.kernel(name))]
    one = form.ring.context.constant(1)
    for value in values:
        for polynomial, power in value.factors()[1]:
            factor = form.ring.fraction(polynomial, one)
            if power > 0 and factor not in found and -factor not in found:
                found.append(factor)
    return tuple(found)


def refuse_zero(letters: Sequence[Rational], values: Mapping[str, Fraction]) -> None:
    """Refuse a point where a letter or a radicand vanishes.

    Raises
    ------
    PointError
        Naming it.
    """
    for letter in letters:
        if not letter.substitute({**values, "eps": Fraction(0)}):
            place = ", ".join(f"{name} = {value}" for name, value in values.items())
            raise PointError(
                f"the point {place} lies on a singularity: {letter} vanishes there; choose another point"
            )


def _along_axis(system: RootedSystem, here: Carried, end: Fraction, bits: int) -> Carried:
    """From x -> 0+ to a positive point; what is singular in between is passed above."""
    for numbers in system.singular():
        if not sum(c * end**k for k, c in enumerate(numbers)):
            raise PointError(
                f"on the way to the point a letter vanishes at the value {end} of a ratio; choose another "
                "point"
            )
    branched = system.needs_cover()
    cover = system.covered() if branched else system
    goal = _root(end) if branched else end
    radius = min(map(abs, approximate_roots(cover.singular())), default=None)
    if goal is not None and (radius is None or float(goal) <= _LAST_STEP * radius):
        first = goal
    else:
        whole = float(end) ** 0.5 if branched else float(end)
        first = Fraction(whole if radius is None else min(whole, _FIRST_STEP * radius))
    at = (first, Fraction(0))
    centre = centre_of(cover, _ZERO, here.roots, bits)
    with precision(bits):
        h = complex_ball(first, 0, bits)
        place = Place(h, h.log())
    here = Carried(
        from_base(centre, here.values, place, bits), roots_after(cover, _ZERO, here.roots, at, bits)
    )
    start = first**2 if branched else first
    if start == end:
        return here
    poles = approximate_roots(system.singular())
    low, high = sorted((float(start), float(end)))
    between = any(abs(p.imag) < 1e-9 * abs(p) and low < p.real < high for p in poles)
    poles += [0j]
    ends = (start, Fraction(0)), (end, Fraction(0))
    try:
        path = planned(poles, *ends, 1 if between else 0)
    except PointError:
        # the functions are regular on the axis: any side will do
        path = planned(poles, *ends, -1)
    return _along_path(system, here, path, bits)


def _root(value: Fraction) -> Fraction | None:
    above, below = isqrt(value.numerator), isqrt(value.denominator)
    return Fraction(above, below) if Fraction(above**2, below**2) == value else None


def _along_path(system: RootedSystem, here: Carried, path: Sequence[Point], bits: int) -> Carried:
    """Through regular points, each in the disc of the one before."""
    nowhere = flint.acb(0)
    for start, end in pairwise(path):
        centre = centre_of(system, start, here.roots, bits)
        with precision(bits):
            step = complex_ball(*end, bits) - complex_ball(*start, bits)
        values = carried(centre, Place(flint.acb(0), nowhere), here.values, Place(step, nowhere), bits)
        here = Carried(values, roots_after(system, start, here.roots, end, bits))
    return here


def _divided(form: EpsilonForm, here: Carried, bits: int) -> Orders:
    with precision(bits):
        factors = []
        for tag in form.tags:
            root = flint.acb(1)
            for index in tag:
                root = root * here.roots[index]
            if root.contains(0):
                raise PrecisionError("a root cannot be told from zero; raise the working precision")
            factors.append(1 / root)
        return tuple(tuple(v * f for v, f in zip(vector, factors, strict=True)) for vector in here.values)
