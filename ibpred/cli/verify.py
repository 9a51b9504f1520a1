"""``ibpred verify``: the evidence once more, from the files alone."""

from __future__ import annotations

import json
from contextlib import nullcontext
from pathlib import Path

import click


@click.command()
@click.argument("folder", metavar="FOLDER")
@click.option("--json", "as_json", is_flag=True, help="Print the result as one JSON object.")
@click.option("--quiet", is_flag=True, help="Show no progress.")
@click.option(
    "--samples",
    type=click.IntRange(min=1000),
    default=20_000,
    show_default=True,
    metavar="N",
    help="Sample points of the direct integration.",
)
@click.option(
    "--seconds",
    type=click.FloatRange(min=0),
    metavar="S",
    help="Stop after about so many seconds, with the checks done.",
)
def verify(folder: str, as_json: bool, quiet: bool, samples: int, seconds: float | None) -> None:
    """Re-run the evidence for a FOLDER that `run` wrote; exit code 1 if a check fails."""
    from ibpred.cli.progress import terminal_progress
    from ibpred.errors import OutOfTimeError, UnfinishedError
    from ibpred.progress import SILENT, Limited
    from ibpred.report.text import checks_text
    from ibpred.run.chain.deadline import deadline
    from ibpred.run.folder.verification import checks_of

    checks, over = [], None
    with nullcontext(SILENT) if quiet else terminal_progress() as progress:
        try:
            for check in checks_of(Path(folder), samples, Limited(progress, deadline(seconds))):
                checks.append(check)
        except OutOfTimeError as error:
            over = error
    data = {"checks": [{"name": c.name, "passed": c.passed, "detail": c.detail} for c in checks]}
    click.echo(json.dumps(data, ensure_ascii=False) if as_json else checks_text(data))
    failed = [c.name for c in checks if not c.passed]
    if failed:
        raise UnfinishedError(f"{folder}: {len(failed)} check(s) failed: {', '.join(failed)}")
    if over is not None:
        raise OutOfTimeError(over.during, f"{len(checks)} checks are done; the others were not made.")
