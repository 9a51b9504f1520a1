"""Time allowed for a command: the deadline, and what is told when it comes."""

from __future__ import annotations

import time
from collections.abc import Iterator
from contextlib import contextmanager

from ibpred.errors import OutOfTimeError
from ibpred.progress import Expired, never
from ibpred.run.chain.stages import Stages


def deadline(seconds: float | None) -> Expired:
    """A deadline so many seconds from now; None for none."""
    if seconds is None:
        return never
    end = time.monotonic() + seconds
    return lambda: time.monotonic() > end


@contextmanager
def told(stages: Stages) -> Iterator[None]:
    """What stops for want of time inside says what is kept, and how to go on."""
    try:
        yield
    except OutOfTimeError as over:
        parts = [over.statement] if over.statement else []
        raise OutOfTimeError(over.during, " ".join([*parts, standing(stages)])) from None


def standing(stages: Stages) -> str:
    """What is finished, what is kept of the rest, and how to go on, in whole sentences."""
    finished = ", ".join(dict.fromkeys(stages.finished)) or "nothing yet"
    text = f"Finished and kept in {stages.store.folder}: {finished}."
    work = stages.store.work()
    if work:
        listed = ", ".join(f"{count} x {kind}" for kind, count in work.items())
        text += f" Kept of what was being done: {listed}."
    else:
        text += " What was being done begins anew."
    return f"{text} The same command goes on from there; give it more time (--seconds), or leave that out."
