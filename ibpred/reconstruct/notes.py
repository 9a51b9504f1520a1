"""Finished parts of a reconstruction, noted so that an interrupted one goes on where it was."""

from __future__ import annotations

from collections.abc import Callable
from typing import Protocol, TypeVar

R = TypeVar("R")


class Notes(Protocol):
    """Keeps records by name, for one black box and one set of arguments."""

    def kept(self, name: str, kind: type[R], compute: Callable[[], R]) -> R:
        """The record noted under a name, computed and noted if there is none."""
        ...


class Forgetful:
    """Notes nothing."""

    def kept(self, name: str, kind: type[R], compute: Callable[[], R]) -> R:
        """Compute."""
        return compute()


FORGETFUL: Notes = Forgetful()
"""The default."""
