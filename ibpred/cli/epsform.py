"""``ibpred epsform``: the epsilon-factorised form."""

from __future__ import annotations

from time import monotonic

import click

from ibpred.cli.common import Shared, emit, open_chain, shared_options


@click.command()
@shared_options
@click.option(
    "--seconds",
    type=click.FloatRange(min=0),
    metavar="S",
    help="Stop after about so many seconds of factorisation, with what was reached.",
)
def epsform(shared: Shared, seconds: float | None) -> None:
    """Try the ε-factorised form; say what stands in its way where there is none."""
    from ibpred.report.json_tables import epsilon_data
    from ibpred.report.text import epsilon_text

    with open_chain(shared) as chain:
        system = chain.dimensionless()
        end = None if seconds is None else monotonic() + seconds
        found = chain.epsilon_form(None if end is None else lambda: monotonic() > end)
        data = epsilon_data(chain.definition, system, found)
    emit(shared, data, lambda: epsilon_text(data))
