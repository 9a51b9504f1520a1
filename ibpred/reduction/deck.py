"""Where tapes are recorded, kept and played, and where parts of a reconstruction are noted."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from ibpred.elimination.replaying import replay
from ibpred.elimination.tape import Tape
from ibpred.family.definition import Powers
from ibpred.reconstruct.notes import FORGETFUL, Notes
from ibpred.reconstruct.sampling import Sampler


@dataclass(frozen=True)
class Recorded:
    """A validated tape for some quantities.

    Attributes
    ----------
    masters, owners
        The masters, in the order given, and the number of the family of each.
    names
        The quantities, for messages.
    tape
        The recorded elimination.
    entries
        For each output of the tape the indices of its quantity and its master.
    rows, columns
        Size of the system that the tape was recorded and validated on.
    """

    masters: tuple[Powers, ...]
    owners: tuple[int, ...]
    names: tuple[str, ...]
    tape: Tape
    entries: tuple[tuple[int, int], ...]
    rows: int
    columns: int


class Deck(Protocol):
    """What a reduction needs for its tapes; a run keeps them in its store, so that it can resume."""

    def recorded(self, key: str, record: Callable[[], Recorded]) -> Recorded:
        """The tape kept under a digest of all that it depends on, recorded if there is none."""
        ...

    def sampler(self, tape: Tape) -> Sampler:
        """The tape as the black box of a reconstruction."""
        ...

    def notes(self, tape: Tape) -> Notes:
        """Where the reconstruction from this tape notes its finished parts."""
        ...


@dataclass(frozen=True)
class TapeSampler:
    """A tape as the black box of a reconstruction, replayed in this thread."""

    tape: Tape

    @property
    def variables(self) -> tuple[str, ...]:
        return self.tape.variables

    @property
    def entries(self) -> int:
        return len(self.tape.outputs)

    def __call__(
        self, points: NDArray[np.uint64], prime: int
    ) -> tuple[NDArray[np.uint64], NDArray[np.bool_]]:
        """Values and good lanes at the points."""
        return replay(self.tape, points, prime)


class PlainDeck:
    """Records afresh, plays in this thread and keeps nothing."""

    def recorded(self, key: str, record: Callable[[], Recorded]) -> Recorded:
        """Record."""
        return record()

    def sampler(self, tape: Tape) -> TapeSampler:
        """Play in this thread."""
        return TapeSampler(tape)

    def notes(self, tape: Tape) -> Notes:
        """Note nothing."""
        return FORGETFUL


PLAIN_DECK: Deck = PlainDeck()
"""The default of every reduction."""
