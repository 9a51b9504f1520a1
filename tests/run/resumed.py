"""A run that kills itself: ``resumed.py FAMILY FOLDER CALLS``.

It reduces the derivatives and some integrals of a family with every piece of work saved at once, kills
itself at the CALLS-th replay (0: never), and prints how many samples it replayed.
"""

from __future__ import annotations

import os
import signal
import sys
from pathlib import Path

import ibpred.run.storage.deck
from ibpred.identities.seeding import Depth, seeds_of_sector
from ibpred.progress import SILENT
from ibpred.run.chain.chain import Chain
from ibpred.run.storage.files import read_family_file
from ibpred.run.storage.store import Store
from ibpred.run.workers.local import Threads


class Mortal(Threads):
    """Threads that live for some replays only."""

    left = 0

    def replay(self, tape, points, prime):
        self.left -= 1
        if self.left == 0:
            os.kill(os.getpid(), signal.SIGKILL)
        return super().replay(tape, points, prime)


def main() -> None:
    file, folder, calls = Path(sys.argv[1]), Path(sys.argv[2]), int(sys.argv[3])
    ibpred.run.storage.deck._UNSAVED_SECONDS = 0.0
    ibpred.run.storage.deck._SECONDS_A_BYTE = 0.0
    workers = Mortal(1)
    workers.left = calls
    with Store(folder) as store:
        chain = Chain(read_family_file(file), store, SILENT, workers)
        chain.derivation()
        count = len(chain.definition.lines)
        seeds = [seeds_of_sector(sector, count, Depth(0, 2)) for sector in chain.analysis().nonzero]
        chain.reduction(tuple(tuple(row) for rows in seeds for row in rows.tolist()))
        print(chain.meter.samples)


main()
