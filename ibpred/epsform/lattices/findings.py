"""Obstacles met modulo a prime, as sentences about the exact system."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from ibpred.epsform.blocks import (
    Finding,
    conjugate,
    exponent_text,
    fractional,
    irregular,
    moving,
    no_exponent,
)
from ibpred.epsform.lattices.local import Obstacle, Trouble
from ibpred.epsform.places import Place
from ibpred.epsform.roots.tags import Tag, tag_of


def finding(obstacle: Obstacle, places: Sequence[Place], name: str) -> Finding:
    """The sentence for an obstacle.

    Parameters
    ----------
    places
        The finite places, in the order of the obstacle's indices.
    name
        The variable, for the point at infinity.
    """

    def text(index: int) -> str:
        return f"{name} = infinity" if index < 0 else places[index].text()

    # the points of one irreducible letter are told once
    exponents = tuple(
        dict.fromkeys(
            (text(index), tuple(exponent_text(e) for e in found)) for index, found in obstacle.exponents
        )
    )
    branch = _branch_points(obstacle, places) if obstacle.trouble is Trouble.FRACTION else ()
    common = _common_roots(obstacle, places) if obstacle.trouble is Trouble.FRACTION else ()
    roots = _roots(obstacle, places) if obstacle.trouble is Trouble.FRACTION else ()
    return Finding(_reason(obstacle, text(obstacle.point)), exponents, branch, name, common, roots)


def _roots(obstacle: Obstacle, places: Sequence[Place]) -> Tag:
    """Fixed finite places with half-integer exponents; none where other fractions occur too."""
    found: dict[str, Place] = {}
    for index, exponents in obstacle.exponents:
        orders = {e.shift.denominator for e in exponents} - {1}
        if not orders:
            continue
        if orders != {2} or (index >= 0 and places[index].moves):
            return ()
        if index >= 0:
            found[places[index].text()] = places[index]
    if not found:
        return ()
    field = next(iter(found.values())).ring
    variables = tuple(name for name in field.names if name != "eps")
    return tag_of([place.polynomial for place in found.values()], field, variables)


def _common_roots(obstacle: Obstacle, places: Sequence[Place]) -> Tag:
    """Fixed places with half-integer exponents only."""
    found: dict[str, Place] = {}
    for index, exponents in obstacle.exponents:
        if index >= 0 and not places[index].moves and all(e.shift.denominator == 2 for e in exponents):
            found[places[index].text()] = places[index]
    if not found:
        return ()
    first = next(iter(found.values()))
    variables = tuple(name for name in first.ring.names if name != "eps")
    return tag_of([place.polynomial for place in found.values()], first.ring, variables)


def _branch_points(obstacle: Obstacle, places: Sequence[Place]) -> tuple[Fraction | None, ...]:
    """The branch points if all roots are square roots at fixed rational points."""
    points: list[Fraction | None] = []
    seen: set[int] = set()
    for index, found in obstacle.exponents:
        orders = {e.shift.denominator for e in found} - {1}
        if not orders or index in seen:
            continue
        seen.add(index)
        if orders != {2} or (index >= 0 and places[index].root is None):
            return ()
        points.append(None if index < 0 else places[index].root)
    return tuple(points)


def _reason(obstacle: Obstacle, point: str) -> str:
    match obstacle.trouble:
        case Trouble.IRREGULAR:
            return irregular(point)
        case Trouble.EXPONENT:
            return no_exponent("eigenvalues of the residue that are not linear in eps", point)
        case Trouble.FRACTION:
            return fractional(obstacle.detail[0], point)
        case Trouble.MOVING:
            return moving(point)
        case Trouble.CONJUGATE:
            return conjugate(point)
        case Trouble.BUNDLE:
            bundle = " + ".join(f"O({degree})" for degree in obstacle.detail)
            return (
                "all exponents are integers plus multiples of eps, but the local solutions glue to the "
                f"nontrivial bundle {bundle}, so no epsilon-form over rational functions exists: at "
                f"eps = 0 the block's solutions are periods of {_geometry(len(obstacle.detail))}"
            )
        case Trouble.CONSTANT:
            return (
                "a Fuchsian form with exponents proportional to eps exists, but no change of basis that is "
                "constant in the ratios factors eps out of it"
            )


def _geometry(size: int) -> str:
    """What a block of this size points to as a rule."""
    return {2: "an elliptic curve, as a rule", 3: "a K3 surface, as a rule"}.get(
        size, "an elliptic curve or of something beyond it, in the whole block or in a part, as a rule"
    )
