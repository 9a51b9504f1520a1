"""``ibpred inspect``: what the family is."""

from __future__ import annotations

import click

from ibpred.cli.common import Shared, emit, open_chain, shared_options


@click.command()
@shared_options
def inspect(shared: Shared) -> None:
    """Loops, legs, U, F, zero sectors, classes of equivalent sectors."""
    from ibpred.report.json_tables import inspect_data
    from ibpred.report.text import inspect_text

    with open_chain(shared) as chain:
        analysis = chain.analysis()
        data = inspect_data(chain.definition, analysis)
    emit(shared, data, lambda: inspect_text(data))
