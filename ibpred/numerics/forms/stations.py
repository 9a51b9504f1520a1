"""Where the way from a corner through positive ratios ends: at the point wanted, or beside it.

On the way smaller ratios are still zero, and letters in this limit may vanish at the wanted value of a larger
one though the point itself is regular. The way then leads to a point beside it from which no letter separates
it.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from fractions import Fraction
from typing import TypeVar

from ibpred.errors import PointError
from ibpred.exact.rational import Rational
from ibpred.numerics.laurent.crossings import crossings

_SHIFTS = tuple(
    Fraction(n, d) for d, n in ((16, 1), (19, -1), (7, 1), (64, 1), (67, -1), (256, 1), (509, -1), (2048, 1))
)

T = TypeVar("T")
Ratios = Mapping[str, Fraction]


def by_a_station(letters: Sequence[Rational], wanted: Ratios, way: Callable[[Ratios], T]) -> tuple[Ratios, T]:
    """Follow a way from the corner to a positive point, or to one beside it.

    Parameters
    ----------
    letters
        Irreducible polynomials at whose zeros the functions may be singular.
    wanted
        The point.
    way
        Leads to a point; raises `PointError` where a letter vanishes at an end on the way.

    Returns
    -------
    tuple
        The point reached, and what the way gave.

    Raises
    ------
    PointError
        Of the first attempt, if all fail.
    """
    try:
        return wanted, way(wanted)
    except PointError as error:
        failure = error
    for station in _beside(letters, wanted):
        try:
            return station, way(station)
        except PointError:
            continue
    raise failure


def _beside(letters: Sequence[Rational], wanted: Ratios) -> Iterator[Ratios]:
    origin = {**wanted, "eps": Fraction(0)}
    apart = [letter for letter in letters if letter.substitute(origin)]
    still = dict.fromkeys(wanted, 0)
    for shift in _SHIFTS:
        station = {name: value * (1 + shift / (k + 1)) for k, (name, value) in enumerate(wanted.items())}
        try:
            if not crossings(apart, station, wanted, still):
                yield station
        except PointError:
            continue
