"""``ibpred epsform``: the epsilon-factorised form."""

from __future__ import annotations

import click

from ibpred.cli.common import Shared, each_family, emit_each, open_chain, several_families


@click.command()
@several_families
def epsform(shared: Shared) -> None:
    """Try the ε-factorised form; say what stands in its way where there is none.

    Of several families one after the other, each for its own masters.
    """
    from ibpred.epsform.form import Obstructed
    from ibpred.errors import OutOfTimeError
    from ibpred.report.json_tables import epsilon_data
    from ibpred.report.text import epsilon_text

    data = []
    for family in each_family(shared):
        with open_chain(family) as chain:
            found = chain.epsilon_form()
            data.append(epsilon_data(chain.definition, chain.dimensionless(), found, chain.offered()))
            if isinstance(found, Obstructed) and not found.complete:
                emit_each(shared, data, epsilon_text)
                raise OutOfTimeError("epsilon-form of the diagonal blocks")
    emit_each(shared, data, epsilon_text)
