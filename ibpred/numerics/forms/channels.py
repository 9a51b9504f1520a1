"""Regions of real kinematics for families without a Euclidean region.

Where no signs of the invariants make F positive, F - i0 defines the integrals in each region of the real
kinematic space that holds no singular point, but no i0 leads from one region to the next: with s + t + u = 0
an imaginary part that lowers one term of F raises another (Tausk, hep-ph/9909506). In one ratio a region is a
sign of the unit and an interval between two letters; inside it the integrals, stripped of a power of the
unit, are analytic in the ratio and solve its differential equation. So each region has boundary constants of
its own. They are all given at x -> 0+, from where a fixed path leads to the region: turn about zero through
the upper half plane, then pass letters above. In several ratios only the region at the corner is known.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

from ibpred.errors import PointError, UnfinishedError
from ibpred.iterated.solution import Level
from ibpred.numerics.forms.path import Target
from ibpred.numerics.forms.point import KinematicPoint, checked_values


@dataclass(frozen=True)
class Channel:
    """A region of real kinematics in one ratio; see `BASE` for several.

    Attributes
    ----------
    unit
        Half turns of y_u: 0 where it is positive, -1 where it is negative.
    lower, upper
        The letters between which the ratio lies; None for none.
    """

    unit: int
    lower: Fraction | None
    upper: Fraction | None

    def is_base(self) -> bool:
        """Whether it is the region next to the corner x -> 0+ with a positive unit."""
        return self.unit == 0 and self.lower == 0

    def ratio(self) -> Fraction:
        """A simple point inside."""
        if self.lower is not None and self.upper is not None:
            return self.lower + (self.upper - self.lower) / 3
        if self.lower is not None:
            return self.lower + max(abs(self.lower), Fraction(1)) / 2
        if self.upper is not None:
            return self.upper - max(abs(self.upper), Fraction(1)) / 2
        return Fraction(1)

    def target(self, ratio: Fraction) -> Target:
        """A ratio inside, on the sheet that the path leads to."""
        return Target(abs(ratio), 0 if ratio > 0 else 1)


BASE = Channel(0, Fraction(0), None)
"""The region at the corner of several ratios, whose letters are not recorded."""


def channel_of(ratio: Fraction, unit: int, roots: Sequence[Fraction | None]) -> Channel:
    """The region of a point.

    Parameters
    ----------
    ratio
        The ratio, a real number where no letter vanishes.
    unit
        Half turns of y_u.
    roots
        The root of each letter; None for letters that are not linear.

    Raises
    ------
    UnfinishedError
        If a letter is not linear.
    """
    if None in roots:
        raise UnfinishedError(
            "a letter is not linear in the ratio, so the regions of a family without a Euclidean region are "
            "not known"
        )
    known = {Fraction(0), *(root for root in roots if root is not None)}
    return Channel(
        unit,
        max((root for root in known if root < ratio), default=None),
        min((root for root in known if root > ratio), default=None),
    )


def is_next_to_corner(levels: Sequence[Level], point: Mapping[str, Fraction]) -> bool:
    """Whether no letter vanishes where the ratios grow from their corner to a point, the largest first.

    Parameters
    ----------
    levels
        Of the epsilon-form at the corner, see `ibpred.iterated.solution.fibration`.
    point
        Positive ratios.

    Raises
    ------
    UnfinishedError
        If a letter is not linear at its level.
    """
    for level in levels:
        for letter, root in zip(level.letters, level.roots(), strict=True):
            if root is None:
                raise UnfinishedError(
                    f"the letter {letter} is not linear in {level.variable}, so the region of the solution "
                    "is not known"
                )
            place = root.substitute({name: point[name] for name in root.variables()}).to_fraction()
            if 0 < place <= point[level.variable]:
                return False
    return True


def scattering_point(
    values: Mapping[str, Fraction],
    signs: Mapping[str, int],
    unit: str,
    dimensions: Mapping[str, int],
    masses: Collection[str],
) -> KinematicPoint:
    """Read a point of a family without a Euclidean region.

    Parameters
    ----------
    values
        Exact values of all invariants and squared masses.
    signs
        Their signs in the region of the solution; ``y_v = e_v v``.
    unit
        The invariant that is set to one inside.
    dimensions
        Mass dimension of each invariant.
    masses
        Those that are squared masses: positive.

    Returns
    -------
    KinematicPoint
        ``y_u`` with the phase -pi where it is negative, a negative ratio with the phase pi: conventions only,
        which the constants of each region allow for.

    Raises
    ------
    PointError
        If invariants are missing, unknown or zero, or a squared mass is negative.
    """
    kept = checked_values(values, signs, masses)
    base = signs[unit] * kept[unit]
    ratios = {}
    for name in signs:
        if name == unit:
            continue
        power, rest = divmod(dimensions[name], dimensions[unit])
        if rest:
            raise PointError(f"the mass dimension of {name} is no multiple of that of the unit {unit}")
        ratio = signs[name] * kept[name] / base**power
        ratios[name] = Target(abs(ratio), 0 if ratio > 0 else 1)
    return KinematicPoint(kept, Target(abs(base), 0 if base > 0 else -1), ratios)
