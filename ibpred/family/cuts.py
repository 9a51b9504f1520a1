"""Cut lines: what they leave undefined."""

from __future__ import annotations

from ibpred.errors import UnfinishedError
from ibpred.family.definition import FamilyDefinition


def refuse_cuts(family: FamilyDefinition) -> None:
    """Check that no line is cut, where values of integrals are wanted.

    The integrals of a family with cuts obey its reductions and differential equations, but so does any
    multiple of them, and they are not those with propagators in the place of the cut lines.

    Raises
    ------
    UnfinishedError
        If a line is cut.
    """
    for number, line in enumerate(family.lines, start=1):
        if line.cut:
            raise UnfinishedError(
                f"{family.name}: line {number} ({line.text}) is cut; a cut fixes which identities hold, not "
                "the factor of the delta function that stands for the line, so that integrals have no values;"
                " take the cuts out of the family to evaluate the integrals with propagators"
            )
