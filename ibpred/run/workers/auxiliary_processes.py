"""Values of eps of an auxiliary-mass plan shared out to processes of this interpreter.

Ball arithmetic holds the interpreter's lock and keeps its precision in one place of a process, so each worker
is a process. It reads one JSON line with the plan, then one a task, and answers with one a task.
"""

from __future__ import annotations

import json
import subprocess
import sys
from collections.abc import Iterator, Sequence
from concurrent.futures import ThreadPoolExecutor
from contextlib import suppress
from queue import SimpleQueue
from typing import IO, Any

import flint

import ibpred.errors
from ibpred.balls.context import Ball, RealBall, precision
from ibpred.digest import JsonData
from ibpred.errors import IbpredError, UnfinishedError
from ibpred.exact.codec import from_data, to_data
from ibpred.numerics.auxiliary.laurent import Sampler, Task, accurate_sample, one_by_one
from ibpred.numerics.auxiliary.plan import AuxiliaryPlan


def process_sampler(width: int) -> Sampler:
    """A sampler that keeps so many processes busy; with one it works in this process.

    Parameters
    ----------
    width
        Number of processes.
    """
    if width == 1:
        return one_by_one

    def sample(plan: AuxiliaryPlan, tasks: Sequence[Task]) -> Iterator[tuple[Ball, ...]]:
        return _shared(min(width, len(tasks)), plan, tasks)

    return sample


def _shared(width: int, plan: AuxiliaryPlan, tasks: Sequence[Task]) -> Iterator[tuple[Ball, ...]]:
    text = json.dumps(to_data(plan))
    free: SimpleQueue[_Worker] = SimpleQueue()
    workers = [_Worker(text) for _ in range(width)]
    for worker in workers:
        free.put(worker)

    def ask(task: Task) -> tuple[Ball, ...]:
        worker = free.get()
        try:
            return worker.ask(task)
        finally:
            free.put(worker)

    pool = ThreadPoolExecutor(width)
    try:
        yield from pool.map(ask, tasks)
    finally:
        for worker in workers:
            worker.close()
        pool.shutdown(cancel_futures=True)


class _Worker:
    """One process that knows the plan."""

    def __init__(self, plan: str) -> None:
        self._process = subprocess.Popen(
            [sys.executable, "-m", "ibpred.run.workers.auxiliary_processes"],
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            text=True,
        )
        self._send(plan)

    def _send(self, line: str) -> None:
        stream: IO[str] | None = self._process.stdin
        assert stream is not None
        try:
            stream.write(line + "\n")
            stream.flush()
        except OSError:
            raise UnfinishedError(
                "a process that computes values ended; the same command tries again"
            ) from None

    def ask(self, task: Task) -> tuple[Ball, ...]:
        """The values of a task."""
        self._send(json.dumps(to_data(task)))
        assert self._process.stdout is not None
        line = self._process.stdout.readline()
        if not line:
            raise UnfinishedError("a process that computes values ended; the same command tries again")
        answer = json.loads(line)
        if "error" in answer:
            raise _error(answer["error"], answer["message"])
        return tuple(_ball_of(data) for data in answer["values"])

    def close(self) -> None:
        """End the process, at once."""
        self._process.kill()
        for stream in (self._process.stdin, self._process.stdout):
            if stream is not None:
                with suppress(OSError):
                    stream.close()
        self._process.wait()


def _error(name: str, message: str) -> IbpredError:
    kind = getattr(ibpred.errors, name, UnfinishedError)
    return kind(message) if issubclass(kind, IbpredError) else UnfinishedError(message)


def _data_of(ball: Ball) -> list[list[int]]:
    """Midpoints and radii of both parts as exact binary numbers (mantissa, exponent)."""
    parts = []
    for part in (ball.real, ball.imag):
        for number in (part.mid(), part.rad()):
            mantissa, exponent = number.man_exp()
            parts.append([int(mantissa), int(exponent)])
    return parts


def _ball_of(data: Sequence[Sequence[int]]) -> Ball:
    numbers: list[RealBall] = []
    # as many bits as the mantissas have: nothing is rounded
    with precision(max(64, *(abs(mantissa).bit_length() for mantissa, _ in data))):
        for mantissa, exponent in data:
            numbers.append(flint.arb((mantissa, exponent)))
        return flint.acb(flint.arb(numbers[0], numbers[1]), flint.arb(numbers[2], numbers[3]))


def serve(source: IO[str], target: IO[str]) -> None:
    """Answer tasks until the source ends."""
    plan = from_data(AuxiliaryPlan, json.loads(source.readline()))
    for line in source:
        answer: dict[str, Any]
        try:
            data: JsonData = json.loads(line)
            answer = {"values": [_data_of(ball) for ball in accurate_sample(plan, from_data(Task, data))]}
        except IbpredError as error:
            answer = {"error": type(error).__name__, "message": str(error)}
        print(json.dumps(answer), file=target, flush=True)


if __name__ == "__main__":
    with suppress(KeyboardInterrupt):
        serve(sys.stdin, sys.stdout)
