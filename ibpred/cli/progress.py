"""Progress on standard error: a bar on a terminal, plain periodic lines elsewhere."""

from __future__ import annotations

import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager

from ibpred.progress import Progress

_SECONDS_BETWEEN_LINES = 5.0
_SECONDS_BETWEEN_DRAWS = 0.1


class _Lines:
    """A line when a part of the work begins, and one every few seconds while it lasts."""

    def __init__(self) -> None:
        self._name = ""
        self._said = 0.0

    def stage(self, name: str) -> None:
        self._name = name
        self._said = time.monotonic()
        print(f"ibpred: {name}", file=sys.stderr, flush=True)

    def advance(self, done: int, total: int | None) -> None:
        now = time.monotonic()
        if now - self._said < _SECONDS_BETWEEN_LINES:
            return
        self._said = now
        of = f" of {total}" if total is not None else ""
        print(f"ibpred: {self._name}: {done}{of}", file=sys.stderr, flush=True)


@contextmanager
def _bar() -> Iterator[Progress]:
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, SpinnerColumn, TextColumn, TimeElapsedColumn
    from rich.progress import Progress as Bars

    columns = (
        SpinnerColumn(),
        TextColumn("{task.description}"),
        BarColumn(),
        MofNCompleteColumn(),
        TimeElapsedColumn(),
    )
    with Bars(*columns, console=Console(stderr=True), transient=True) as bars:
        task = bars.add_task("starting", total=None)

        class Bar:
            def __init__(self) -> None:
                self._drawn = 0.0

            def stage(self, name: str) -> None:
                bars.reset(task, description=name, total=None, completed=0)

            def advance(self, done: int, total: int | None) -> None:
                now = time.monotonic()
                if now - self._drawn >= _SECONDS_BETWEEN_DRAWS or done == total:
                    self._drawn = now
                    bars.update(task, completed=done, total=total)

        yield Bar()


@contextmanager
def terminal_progress() -> Iterator[Progress]:
    """Progress for whoever watches standard error."""
    if sys.stderr.isatty():
        with _bar() as bar:
            yield bar
    else:
        yield _Lines()
