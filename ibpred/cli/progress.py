"""Progress on standard error: a bar on a terminal, plain periodic lines elsewhere."""

from __future__ import annotations

import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager

from ibpred.progress import Progress

_SECONDS_BETWEEN_LINES = 5.0
_SECONDS_BETWEEN_DRAWS = 0.1


class _Pace:
    """How fast the units of one planned task come."""

    def __init__(self) -> None:
        self._task = ""
        self._began = 0.0
        self.planned = False

    def stage(self, name: str) -> None:
        """Parts of one task, ``task: part``, share one clock."""
        task = name.partition(":")[0]
        if task != self._task:
            self._task, self._began, self.planned = task, time.monotonic(), False

    def plan(self, done: int, total: int) -> float:
        """Seconds that the rest is going to take, as known when the plan is."""
        self.planned = True
        return self.left(done, total)

    def left(self, done: int, total: int) -> float:
        """Seconds that the rest will take at the pace so far."""
        return (time.monotonic() - self._began) * max(0, total - done) / max(1, done)


def duration(seconds: float) -> str:
    """Words for a time that is only roughly known."""
    for size, unit in ((86400.0, "days"), (3600.0, "h"), (60.0, "min")):
        if seconds >= 2 * size:
            return f"{seconds / size:.0f} {unit}"
    return f"{seconds:.0f} s" if seconds >= 1 else "less than 1 s"


def _plan_line(text: str, seconds: float) -> str:
    return f"ibpred: plan: {text}; about {duration(seconds)}"


class _Lines:
    """A line when a part of the work begins, and one every few seconds while it lasts."""

    def __init__(self) -> None:
        self._name = ""
        self._said = 0.0
        self._pace = _Pace()

    def stage(self, name: str) -> None:
        self._name = name
        self._said = time.monotonic()
        self._pace.stage(name)
        print(f"ibpred: {name}", file=sys.stderr, flush=True)

    def plan(self, text: str, done: int, total: int) -> None:
        print(_plan_line(text, self._pace.plan(done, total)), file=sys.stderr, flush=True)

    def advance(self, done: int, total: int | None) -> None:
        now = time.monotonic()
        if now - self._said < _SECONDS_BETWEEN_LINES:
            return
        self._said = now
        of = f" of {total}" if total is not None else ""
        if self._pace.planned and total is not None and done < total:
            of += f", about {duration(self._pace.left(done, total))} left"
        print(f"ibpred: {self._name}: {done}{of}", file=sys.stderr, flush=True)


@contextmanager
def _bar() -> Iterator[Progress]:
    from rich.console import Console
    from rich.progress import (
        BarColumn,
        MofNCompleteColumn,
        SpinnerColumn,
        TextColumn,
        TimeElapsedColumn,
    )
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
                self._pace = _Pace()
                self._name = ""

            def plan(self, text: str, done: int, total: int) -> None:
                line = _plan_line(text, self._pace.plan(done, total))
                bars.console.print(line, highlight=False, markup=False)

            def stage(self, name: str) -> None:
                self._pace.stage(name)
                self._name = name
                bars.reset(task, description=name, total=None, completed=0)

            def advance(self, done: int, total: int | None) -> None:
                now = time.monotonic()
                if now - self._drawn >= _SECONDS_BETWEEN_DRAWS or done == total:
                    self._drawn = now
                    name = self._name
                    if self._pace.planned and total is not None and done < total:
                        name += f", about {duration(self._pace.left(done, total))} left"
                    bars.update(task, description=name, completed=done, total=total)

        yield Bar()


@contextmanager
def terminal_progress() -> Iterator[Progress]:
    """Progress for whoever watches standard error."""
    if sys.stderr.isatty():
        with _bar() as bar:
            yield bar
    else:
        yield _Lines()
