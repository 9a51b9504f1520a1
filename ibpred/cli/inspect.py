"""``ibpred inspect``: what the family is."""

from __future__ import annotations

from pathlib import Path

import click

from ibpred.cli.common import Shared, emit, open_chain, shared_options


@click.command()
@shared_options
@click.option(
    "--picture",
    metavar="FILE.svg",
    help="Draw the family's graph and one graph for each class of equivalent sectors.",
)
def inspect(shared: Shared, picture: str | None) -> None:
    """Loops, legs, U, F, zero sectors, classes of equivalent sectors."""
    from ibpred.report.drawing import sheet_svg
    from ibpred.report.json_tables import inspect_data
    from ibpred.report.text import inspect_text
    from ibpred.run.storage.files import write_file

    with open_chain(shared) as chain:
        analysis = chain.analysis()
        data = inspect_data(chain.definition, analysis)
        if picture is not None:
            write_file(Path(picture), sheet_svg(chain.definition, analysis.representatives, columns=6))
    emit(shared, data, lambda: inspect_text(data))
