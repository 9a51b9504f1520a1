"""Sampling on a Dask cluster: the same values, also when a worker is killed and another one joins."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import threading
import time
from pathlib import Path

import numpy as np
import pytest

from ibpred.elimination.replaying import replay
from ibpred.elimination.tape import Tape
from ibpred.errors import InputError
from ibpred.exact.primes import first_primes
from ibpred.family.reading import read_family
from ibpred.identities.derivatives import derivative_templates
from ibpred.identities.quantities import template_at
from ibpred.reduction.masters import find_masters
from ibpred.reduction.recording import record_quantities
from ibpred.run.workers.cluster import Cluster
from ibpred.run.workers.local import Threads
from ibpred.sectors.analysis import analyse

PRIMES = first_primes(3)


def tape_of(name: str) -> Tape:
    """The tape of a family's differential equation."""
    file = Path(__file__).parents[2] / "families" / f"{name}.toml"
    family = read_family(file.read_text(encoding="utf-8"), file.name, name)
    analysis = analyse(family)
    masters = find_masters(family, analysis, PRIMES[0], 1).masters
    templates = derivative_templates(family)
    quantities = [template_at(templates[i.name], m) for i in family.invariants for m in masters]
    return record_quantities(family, analysis, masters, quantities, PRIMES, 1).tape


def points_for(tape: Tape, count: int) -> np.ndarray:
    random = np.random.default_rng(5)
    return random.integers(1, PRIMES[2], size=(len(tape.variables), count), dtype=np.uint64)


def test_any_number_of_threads_gives_the_same() -> None:
    tape = tape_of("planar-double-box")
    points = points_for(tape, 2000)
    values, good = replay(tape, points, PRIMES[2])
    for count in (1, 2, 5):
        workers = Threads(count)
        found, usable = workers.replay(tape, points, PRIMES[2])
        workers.close()
        assert np.array_equal(found, values)
        assert np.array_equal(usable, good)


def test_nobody_at_the_address(monkeypatch: pytest.MonkeyPatch) -> None:
    pytest.importorskip("distributed")
    monkeypatch.setattr("ibpred.run.workers.cluster._SECONDS_TO_ANSWER", 1)
    with pytest.raises(InputError, match=r"no Dask scheduler answers at tcp://127\.0\.0\.1:9"):
        Cluster("tcp://127.0.0.1:9")


class _Site:
    """A scheduler and workers as processes of their own."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        self.address = f"tcp://127.0.0.1:{20000 + os.getpid() % 20000}"
        port = self.address.rpartition(":")[2]
        self.processes = [
            self._start(
                "distributed.cli.dask_scheduler", "--host", "127.0.0.1", "--port", port, "--no-dashboard"
            )
        ]

    def _start(self, module: str, *arguments: str) -> subprocess.Popen[bytes]:
        with (self.folder / "log").open("ab") as log:
            return subprocess.Popen(
                [sys.executable, "-m", module, *arguments], cwd=self.folder, stdout=log, stderr=log
            )

    def worker(self) -> subprocess.Popen[bytes]:
        """One more worker, without a nanny that would start it again."""
        found = self._start(
            "distributed.cli.dask_worker", self.address, "--nthreads", "1", "--no-nanny", "--no-dashboard"
        )
        self.processes.append(found)
        return found

    def close(self) -> None:
        for process in reversed(self.processes):
            process.kill()
            process.wait()


@pytest.fixture
def site(tmp_path: Path):
    pytest.importorskip("distributed")
    found = _Site(tmp_path)
    yield found
    found.close()


def test_a_worker_is_killed_and_another_joins(site: _Site) -> None:
    tape = tape_of("planar-double-box-one-leg")
    points = points_for(tape, 60_000)
    expected, good = Threads(2).replay(tape, points, PRIMES[2])
    first, _second = site.worker(), site.worker()
    cluster = Cluster(site.address)
    finished = threading.Event()
    in_time = []
    try:
        small = cluster.replay(tape, points[:, :100], PRIMES[2])
        assert np.array_equal(small[0], expected[:, :100])
        while cluster.width < 2:
            time.sleep(0.1)

        def disturb() -> None:
            time.sleep(0.2)
            in_time.append(not finished.is_set())
            first.send_signal(signal.SIGKILL)
            site.worker()

        killer = threading.Thread(target=disturb)
        killer.start()
        values, usable = cluster.replay(tape, points, PRIMES[2])
        finished.set()
        killer.join()
        assert in_time == [True]
        assert first.wait() == -signal.SIGKILL
        assert np.array_equal(values, expected)
        assert np.array_equal(usable, good)
    finally:
        cluster.close()
