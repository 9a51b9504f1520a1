"""How a long stage reports its progress: an object passed in, with a silent one as default.

A report is also where a stage may be stopped: an object that watches a deadline raises `OutOfTimeError` from
it. Nothing is half done then, since stages only return whole records; who called the stage keeps what was
finished before.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Protocol

from ibpred.errors import OutOfTimeError

Expired = Callable[[], bool]
"""Tells whether the time allowed is over."""


def never() -> bool:
    """The deadline of who has no deadline."""
    return False


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


class Limited:
    """Progress with a deadline: the first report after it stops the work.

    Parameters
    ----------
    watcher
        Told everything.
    expired
        The deadline.
    """

    def __init__(self, watcher: Progress, expired: Expired) -> None:
        self._watcher = watcher
        self._expired = expired
        self._name = "the start"

    def _check(self) -> None:
        if self._expired():
            raise OutOfTimeError(self._name)

    def stage(self, name: str) -> None:
        """Tell it, unless the time is over."""
        self._check()
        self._name = name
        self._watcher.stage(name)

    def advance(self, done: int, total: int | None) -> None:
        """Tell it, unless the time is over."""
        self._check()
        self._watcher.advance(done, total)

    def plan(self, text: str, done: int, total: int) -> None:
        """Tell it, unless the time is over."""
        self._check()
        self._watcher.plan(text, done, total)
