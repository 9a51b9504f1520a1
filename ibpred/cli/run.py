"""``ibpred run``: the whole chain."""

from __future__ import annotations

from pathlib import Path

import click

from ibpred.cli.common import Shared, emit, open_chain, shared_options


@click.command()
@shared_options
@click.option("--output", metavar="DIR", help="Folder of the results [default: solutions/NAME].")
@click.option("--digits", type=click.IntRange(1, 2000), default=30, show_default=True, metavar="N")
def run(shared: Shared, output: str | None, digits: int) -> None:
    """Everything, from the family file to digits, into one folder."""
    from ibpred.report.text import run_text
    from ibpred.run.folder.whole import run_whole

    with open_chain(shared) as chain:
        folder = Path(output) if output else Path("solutions") / chain.definition.name
        done = run_whole(chain, shared.file, folder, digits)
        emit(shared, done.data, lambda: run_text(done.data))
        if done.stopped is not None:
            raise done.stopped
