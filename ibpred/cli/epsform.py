"""``ibpred epsform``: the epsilon-factorised form."""

from __future__ import annotations

import click

from ibpred.cli.common import Shared, emit, open_chain, shared_options


@click.command()
@shared_options
def epsform(shared: Shared) -> None:
    """Try the ε-factorised form; say what stands in its way where there is none."""
    from ibpred.epsform.form import Obstructed
    from ibpred.errors import OutOfTimeError
    from ibpred.report.json_tables import epsilon_data
    from ibpred.report.text import epsilon_text

    with open_chain(shared) as chain:
        found = chain.epsilon_form()
        data = epsilon_data(chain.definition, chain.dimensionless(), found, chain.offered())
        emit(shared, data, lambda: epsilon_text(data))
        if isinstance(found, Obstructed) and not found.complete:
            raise OutOfTimeError("epsilon-form of the diagonal blocks")
