"""``ibpred diffeq``: the differential equations of the masters."""

from __future__ import annotations

import click

from ibpred.cli.common import Shared, emit, open_chain, shared_options


@click.command()
@shared_options
def diffeq(shared: Shared) -> None:
    """Derive the differential equations of the masters in each invariant."""
    from ibpred.report.json_tables import differential_data
    from ibpred.report.text import differential_text

    with open_chain(shared) as chain:
        data = differential_data(chain.derivation().system)
    emit(shared, data, lambda: differential_text(data))
