"""Workers of a running Dask scheduler; they may come and go while a tape is sampled."""

from __future__ import annotations

import io
import warnings
from typing import Any

import numpy as np
from numpy.typing import NDArray

import ibpred
from ibpred.elimination.replaying import replay
from ibpred.elimination.tape import Tape
from ibpred.errors import InputError, UnfinishedError
from ibpred.run.workers.local import LANES, Samples, joined, pieces

_BLOCKS = 4  # tasks a thread of the cluster, so that a slow one holds nobody up
_ATTEMPTS = 20  # times that a block is handed out again after its workers died
_SECONDS_TO_ANSWER = 15


class Cluster:
    """The workers of a Dask scheduler.

    The tape is a task of its own, so that a worker that joins late, or takes over from one that died,
    gets it without being told.

    Parameters
    ----------
    address
        Of the scheduler, e.g. ``tcp://10.0.0.1:8786``.

    Raises
    ------
    InputError
        If the extra is not installed, or nobody answers at the address.
    """

    def __init__(self, address: str) -> None:
        try:
            from distributed import Client
        except ImportError:
            raise InputError(
                "--cluster needs the packages dask and distributed: pip install 'ibpred[cluster]'"
            ) from None
        self.address = address
        try:
            self._client: Any = Client(address, timeout=_SECONDS_TO_ANSWER, set_as_default=False)
        except (OSError, ValueError) as error:
            raise InputError(f"no Dask scheduler answers at {address} ({error})") from error
        self._tape: tuple[str, Any] | None = None

    @property
    def width(self) -> int:
        """Threads of the workers that are there now; at least one."""
        return max(1, sum(int(threads) for threads in self._client.nthreads().values()))

    def replay(self, tape: Tape, points: NDArray[np.uint64], prime: int) -> Samples:
        """Values and good lanes at the points.

        Raises
        ------
        UnfinishedError
            If the scheduler is lost, or workers die again and again over the same block.
        """
        from distributed import CancelledError, KilledWorker

        size = max(1, -(-points.shape[1] // (self.width * _BLOCKS * LANES))) * LANES
        blocks = [points[:, a:b] for a, b in pieces(points.shape[1], size)]
        for attempt in range(_ATTEMPTS):
            try:
                remote = self._remote(tape, fresh=attempt > 0)
                futures = [
                    self._client.submit(_replayed, remote, block, prime, ibpred.__version__, pure=False)
                    for block in blocks
                ]
                return joined(self._client.gather(futures))
            except (KilledWorker, CancelledError):
                continue
            except (OSError, TimeoutError) as error:
                raise UnfinishedError(
                    f"the Dask scheduler at {self.address} is lost ({error}); what was finished is kept: "
                    "run the same command again"
                ) from error
        raise UnfinishedError(
            f"workers of {self.address} died {_ATTEMPTS} times over the same samples; look at their memory "
            "limit and their logs; what was finished is kept: run the same command again"
        )

    def _remote(self, tape: Tape, fresh: bool) -> Any:
        """The tape as a future of the cluster."""
        identity = tape.digest()
        if fresh or self._tape is None or self._tape[0] != identity:
            with warnings.catch_warnings():
                warnings.simplefilter("ignore")  # the tape is large, and has to be sent once
                self._tape = (identity, self._client.submit(_tape, _packed(tape), pure=False))
        return self._tape[1]

    def close(self) -> None:
        """Leave the scheduler; its workers stay."""
        self._tape = None
        self._client.close()


def _packed(tape: Tape) -> bytes:
    target = io.BytesIO()
    np.savez_compressed(target, **tape.to_arrays())  # type: ignore[arg-type]
    return target.getvalue()


def _tape(packed: bytes) -> Tape:
    """Runs on a worker: unpack a tape, its digest checked."""
    with np.load(io.BytesIO(packed), allow_pickle=False) as archive:
        return Tape.from_arrays({name: archive[name] for name in archive.files})


def _replayed(tape: Tape, points: NDArray[np.uint64], prime: int, version: str) -> Samples:
    """Runs on a worker: replay a tape."""
    if version != ibpred.__version__:
        raise UnfinishedError(
            f"a worker runs ibpred {ibpred.__version__}, this is {version}; install the same"
        )
    return replay(tape, points, prime)
