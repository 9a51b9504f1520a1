"""Transport of boundary vectors from x = 0 to another singular point, with exact constants.

For ``d f = eps sum_a A_a dlog(x - a) f`` write ``f ~ x^(eps A_0) c`` at x -> 0+ and, on approaching the
target, ``f ~ u^(eps A_target) c_target`` where u = |x - target|, or u = 1/|x| at infinity. Then
``c_target = Z(eps) c``: the regularised path-ordered exponential (Drinfeld's associator for two letters).
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from enum import Enum
from fractions import Fraction
from typing import Any, Union

import flint

from ibpred.errors import BoundaryError
from ibpred.iterated.constants.constants import Constant, log_of
from ibpred.iterated.constants.matrices import (
    MatrixSeries,
    accumulate,
    exponential,
    nonzero,
    word_products,
)
from ibpred.iterated.constants.zeta import regularised_value


class Infinity(Enum):
    """The point x = infinity."""

    INFINITY = "infinity"


INFINITY = Infinity.INFINITY
Point = Union[Fraction, Infinity]
Residues = Mapping[Fraction, Any]
"""Finite letter a -> residue A_a (`flint.fmpq_mat`)."""

_UNIT_LETTERS = frozenset({Fraction(0), Fraction(1), Fraction(-1)})
_TURNED_LETTERS = frozenset({Fraction(0), Fraction(1), Fraction(2)})


def point_text(point: Point, variable: str = "x") -> str:
    """``x = 0`` and the like, for messages."""
    return f"{variable} = {point.value if isinstance(point, Infinity) else point}"


def residue_at(residues: Residues, point: Point) -> Any:
    """Residue at a point: of ``x - a``, or of ``1/x`` at infinity (minus the sum of all)."""
    size = next(iter(residues.values())).nrows()
    if isinstance(point, Infinity):
        total = flint.fmpq_mat(size, size)
        for matrix in residues.values():
            total = total - matrix
        return total
    return residues.get(point, flint.fmpq_mat(size, size))


@dataclass(frozen=True)
class IntervalMap:
    """``x = r t / (1 - kappa t)`` maps [0, 1] to the path from 0 to a goal.

    Attributes
    ----------
    scale
        r: ``x = r t + ...`` at t -> 0.
    end_scale
        q: the distance from the goal (1/x for the goal infinity) is ``q (1 - t) + ...`` at t -> 1.
    letters
        Image of each letter; None at t = infinity.
    pole
        Image of x = infinity; None where it is t = infinity.
    """

    scale: Fraction
    end_scale: Fraction
    letters: Mapping[Fraction, Fraction | None]
    pole: Fraction | None


def connection(
    residues: Residues, target: Point, order: int, passed: Sequence[Fraction] = ()
) -> MatrixSeries:
    """Z(eps) with ``c_target = Z c``, through ``eps^order``.

    The path is the straight real segment from 0 to the target; to reach a negative target the path first
    turns about zero through the upper half plane, so that log x = log|x| + i pi there (with the target's
    residue unchanged, u = |x - target|).

    Parameters
    ----------
    residues
        Finite letter -> residue (`flint.fmpq_mat`); 0 may be missing.
    target
        The point to reach: a nonzero rational number or `INFINITY` (along x > 0).
    order
        Highest power of eps.
    passed
        Letters inside the path at which the solution is known to be regular (their residue annihilates
        the boundary vector there); the path leads through them.

    Raises
    ------
    BoundaryError
        If another letter lies inside the path, or if the path needs constants that are not known here:
        anything but the letters 0, 1, -1 (or 0, 1, 2) after a Moebius map, scales with prime factors other
        than 2 and 3, weights beyond the tables.
    """
    if target == 0:
        raise BoundaryError("the transport from x = 0 must lead to another point")
    inside = [a for a in passed if a * _direction(target) > 0 and _is_before(a, target)]
    if inside:
        stop = min(inside, key=abs)
        rest: Point = target if isinstance(target, Infinity) else target - stop
        shifted = {a - stop: matrix for a, matrix in residues.items()}
        further = connection(shifted, rest, order, [a - stop for a in inside if a != stop])
        return further @ connection(residues, stop, order)
    start = residue_at(residues, Fraction(0))
    sign = _direction(target)
    reflected = {sign * a: matrix for a, matrix in residues.items() if matrix}
    end = residue_at(residues, target)
    goal = target if isinstance(target, Infinity) else abs(target)
    chart = _chart(reflected, goal, target)
    at: dict[Fraction, Any] = {}
    for a, matrix in reflected.items():
        image = chart.letters[a]
        if image is not None:
            at[image] = matrix
    if chart.pole is not None:
        infinite = residue_at(reflected, INFINITY) if reflected else start
        if infinite:
            at[chart.pole] = infinite
    middle = _exponential_to_one(at, start, order)
    first = _scaling(start, chart.scale, 1, target, order)
    last = _scaling(end, chart.end_scale, -1, target, order)
    result = last @ middle @ first
    if sign < 0:
        half_turn = Constant.generator("I") * Constant.generator("pi")
        result = result @ exponential(start, half_turn, order)
    return result


def _direction(target: Point) -> int:
    return -1 if isinstance(target, Fraction) and target < 0 else 1


def _is_before(a: Fraction, target: Point) -> bool:
    return isinstance(target, Infinity) or abs(a) < abs(target)


def _scaling(matrix: Any, scale: Fraction, sign: int, target: Point, order: int) -> MatrixSeries:
    if not matrix:
        return exponential(matrix, Constant.rational(0), order)
    try:
        logarithm = log_of(scale)
    except KeyError as error:
        raise BoundaryError(
            f"the transport from x = 0 to {point_text(target)} needs {error.args[0]}, "
            "which is not among the exact constants"
        ) from None
    return exponential(matrix, logarithm * sign, order)


def _exponential_to_one(at: Mapping[Fraction, Any], start: Any, order: int) -> MatrixSeries:
    """Regularised path-ordered exponential from t = 0 to t = 1."""
    turned = not set(at) <= _UNIT_LETTERS
    orders: list[dict[Any, Any]] = [{} for _ in range(order + 1)]
    letters = {int(a): matrix for a, matrix in at.items()} or {0: start}
    for word, matrix in word_products(letters, order):
        if turned:
            # path reversal and t -> 1 - t bring the letters 0, 1, 2 to 1, 0, -1
            value = regularised_value(tuple(1 - a for a in reversed(word))) * (-1) ** len(word)
        else:
            value = regularised_value(word)
        for monomial, factor in value.terms():
            scaled = matrix * flint.fmpq(factor.numerator, factor.denominator)
            accumulate(orders[len(word)], monomial, scaled)
    return MatrixSeries(tuple(nonzero(c) for c in orders))


def _chart(letters: Mapping[Fraction, Any], goal: Point, target: Point) -> IntervalMap:
    inside = [a for a in letters if a > 0 and (isinstance(goal, Infinity) or a < goal)]
    if inside:
        raise BoundaryError(
            f"the straight path from x = 0 to {point_text(target)} meets the singular point "
            f"x = {inside[0]}: this transport is not available"
        )
    found = interval_map(tuple(letters), goal, bool(residue_at(letters, INFINITY)) if letters else False)
    if found is None:
        listed = ", ".join(str(a) for a in sorted(letters))
        raise BoundaryError(
            f"the transport from x = 0 to {point_text(target)} with the letters {listed} needs iterated "
            "integrals that are no alternating sums; their exact values are not known here"
        )
    return found


def interval_map(letters: Sequence[Fraction], goal: Point, singular_infinity: bool) -> IntervalMap | None:
    """A map of [0, 1] to the path from 0 to the goal that brings the letters to 0, 1, -1 or to 0, 1, 2.

    Parameters
    ----------
    letters
        Letters, none inside the path.
    goal
        A positive number or infinity.
    singular_infinity
        Whether x = infinity is a letter as well.

    Returns
    -------
    IntervalMap or None
        The simplest of those tried; None where none fits.
    """
    found = None
    for scale, kappa in _moebius_candidates(letters, goal):
        images = {a: _image(a, scale, kappa) for a in letters}
        pole = None if kappa == 0 else 1 / kappa
        used = {image for image in images.values() if image is not None}
        if pole is not None and singular_infinity:
            used.add(pole)
        end_scale = 1 / scale if isinstance(goal, Infinity) else goal / (1 - kappa)
        if used <= _UNIT_LETTERS or used <= _TURNED_LETTERS:
            chart = IntervalMap(scale, end_scale, images, pole)
            simplicity = (not used <= {0, 1}, scale != 1, end_scale != 1)
            if found is None or simplicity < found[0]:
                found = simplicity, chart
    return None if found is None else found[1]


def _image(a: Fraction, scale: Fraction, kappa: Fraction) -> Fraction | None:
    below = scale + kappa * a
    return None if below == 0 else a / below


def _moebius_candidates(letters: Sequence[Fraction], goal: Point) -> Iterator[tuple[Fraction, Fraction]]:
    """Maps x = r t/(1 - kappa t) with x(0) = 0, x(1) = goal that send one letter to -1, 2 or infinity."""
    others = [a for a in letters if a not in (0, goal)]
    if isinstance(goal, Infinity):
        scales = [Fraction(1)]
        for a in others:
            scales += [a / tau - a for tau in (Fraction(-1), Fraction(2))] + [-a]
        yield from ((r, Fraction(1)) for r in scales if r > 0)
        return
    kappas = [Fraction(0), Fraction(-1), Fraction(1, 2)]
    for a in others:
        kappas += [(a / tau - goal) / (a - goal) for tau in (Fraction(-1), Fraction(2))]
        kappas.append(-goal / (a - goal))
    yield from ((goal * (1 - kappa), kappa) for kappa in kappas if kappa < 1)
