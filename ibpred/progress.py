"""How a long stage reports its progress: an object passed in, with a silent one as default."""

from __future__ import annotations

from typing import Protocol


class Progress(Protocol):
    """What a stage tells while it works; whoever passes the object decides what to show."""

    def stage(self, name: str) -> None:
        """A new part of the work begins."""

    def advance(self, done: int, total: int | None) -> None:
        """`done` units of the current part are finished, of `total` where that is known."""

    def plan(self, text: str, done: int, total: int) -> None:
        """What the current part will take, told before it gets long: `done` of `total` units so far."""


class Silent:
    """Progress that nobody watches."""

    def stage(self, name: str) -> None:
        """Say nothing."""

    def advance(self, done: int, total: int | None) -> None:
        """Say nothing."""

    def plan(self, text: str, done: int, total: int) -> None:
        """Say nothing."""


SILENT: Progress = Silent()
"""The default of every stage."""
