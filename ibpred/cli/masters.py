"""``ibpred masters``: the master integrals."""

from __future__ import annotations

import click

from ibpred.cli.common import Shared, emit, open_chain, shared_options


@click.command()
@shared_options
def masters(shared: Shared) -> None:
    """Find the master integrals."""
    from ibpred.report.json_tables import masters_data
    from ibpred.report.text import masters_text

    with open_chain(shared) as chain:
        data = masters_data(chain.definition, chain.masters())
    emit(shared, data, lambda: masters_text(data))
