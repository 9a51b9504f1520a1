"""``ibpred diffeq``: the differential equations of the masters."""

from __future__ import annotations

import click

from ibpred.cli.common import Shared, each_family, emit_each, open_chain, several_families


@click.command()
@several_families
def diffeq(shared: Shared) -> None:
    """Derive the differential equations of the masters in each invariant.

    Of several families one after the other, each for its own masters.
    """
    from ibpred.report.json_tables import differential_data
    from ibpred.report.text import differential_text

    found = []
    for family in each_family(shared):
        with open_chain(family) as chain:
            found.append(differential_data(chain.derivation().system))
    emit_each(shared, found, differential_text)
