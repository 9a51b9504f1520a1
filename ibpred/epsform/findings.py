"""Obstacles met modulo a prime, as sentences about the exact system."""

from __future__ import annotations

from collections.abc import Sequence

from ibpred.epsform.blocks import Finding, exponent_text, fractional, irregular, moving, no_exponent
from ibpred.epsform.local import Obstacle, Trouble
from ibpred.epsform.places import Place


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

    exponents = tuple(
        (text(index), tuple(exponent_text(e) for e in found)) for index, found in obstacle.exponents
    )
    return Finding(_reason(obstacle, text(obstacle.point)), exponents)


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
            return (
                f"the roots of {point} have different residues, so an odd letter with the square root of "
                "its discriminant is needed: such letters are not supported yet"
            )
        case Trouble.BUNDLE:
            bundle = " + ".join(f"O({degree})" for degree in obstacle.detail)
            return (
                "all exponents are integers plus multiples of eps, but the local solutions glue to the "
                f"nontrivial bundle {bundle}, so no epsilon-form over rational functions exists: the "
                "block's solutions at eps = 0 are periods of a curve or a higher variety"
            )
        case Trouble.CONSTANT:
            return (
                "a Fuchsian form with exponents proportional to eps exists, but no change of basis that is "
                "constant in the ratios factors eps out of it"
            )
