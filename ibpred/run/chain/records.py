"""What the chain keeps of its stages, beside the records of the stages themselves."""

from __future__ import annotations

from dataclasses import dataclass

from ibpred.epsform.form import EpsilonForm, Obstructed
from ibpred.reduction.independent import SectorCount


@dataclass(frozen=True)
class Counts:
    """Masters beside critical points, sector by sector."""

    sectors: tuple[SectorCount, ...]


class StoppedError(Exception):
    """Carries what was reached when the time was over past the store."""

    def __init__(self, reached: Obstructed) -> None:
        super().__init__("the time is over")
        self.reached = reached


@dataclass(frozen=True)
class Outcome:
    """An epsilon-form, or what stands in its way; the other one is None."""

    form: EpsilonForm | None
    obstructed: Obstructed | None


def outcome_of(found: EpsilonForm | Obstructed) -> Outcome:
    """The record of either."""
    if isinstance(found, EpsilonForm):
        return Outcome(found, None)
    return Outcome(None, found)
