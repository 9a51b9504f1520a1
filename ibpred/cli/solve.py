"""``ibpred solve``: iterated integrals with boundary constants."""

from __future__ import annotations

import click

from ibpred.cli.common import Shared, emit, open_chain, shared_options


@click.command()
@shared_options
@click.option("--weight", type=click.IntRange(min=0), metavar="W", help="Highest weight [default: 2 L].")
@click.option(
    "--variables",
    metavar="NAMES",
    help="Variables in the order of the words, the smallest first, as in y,x [default: as in the form].",
)
def solve(shared: Shared, weight: int | None, variables: str | None) -> None:
    """Solve in iterated integrals, with boundary constants.

    With --seconds the weights are taken one after the other, and those reached in time are printed.
    """
    from ibpred.report.json_tables import solution_data
    from ibpred.report.text import solution_text
    from ibpred.run.constants.solved import solved_in_time

    with open_chain(shared) as chain:
        highest = chain.order_of_weight(2 * len(chain.definition.loops) if weight is None else weight)
        corner = tuple(name.strip() for name in variables.split(",")) if variables else ()
        found = solved_in_time(chain, highest, corner)
        data = solution_data(chain.definition, found.boundary, found.solution)
        emit(shared, data, lambda: solution_text(data))
        if found.stopped is not None:
            raise found.stopped
