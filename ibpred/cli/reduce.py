"""``ibpred reduce``: integrals to masters."""

from __future__ import annotations

from pathlib import Path

import click

from ibpred.cli.common import Shared, emit, open_chain, parse_list_file, parse_powers, shared_options
from ibpred.errors import InputError


@click.command()
@shared_options
@click.option("--integral", "integrals", multiple=True, metavar="POWERS", help='An integral, "1,1,1,-1".')
@click.option("--list", "list_file", metavar="FILE", help="A file with one integral a line.")
@click.option("--max-dots", type=click.IntRange(min=0), metavar="A", help="All integrals with <= A dots.")
@click.option("--max-rank", type=click.IntRange(min=0), metavar="B", help="All integrals with rank <= B.")
def reduce(
    shared: Shared,
    integrals: tuple[str, ...],
    list_file: str | None,
    max_dots: int | None,
    max_rank: int | None,
) -> None:
    """Reduce integrals to master integrals."""
    from ibpred.report.json_tables import reduction_data
    from ibpred.report.text import reduction_text

    wanted = [parse_powers(text, "--integral") for text in integrals]
    if list_file is not None:
        wanted += parse_list_file(Path(list_file))
    everything = max_dots is not None or max_rank is not None
    if not wanted and not everything:
        raise InputError("nothing to reduce: give --integral, --list, or --max-dots and --max-rank")
    with open_chain(shared) as chain:
        if everything:
            wanted += chain.integrals_within(max_dots or 0, max_rank or 0)
        table = chain.reduction(tuple(dict.fromkeys(wanted)))
        data = reduction_data(chain.definition, table)
    emit(shared, data, lambda: reduction_text(data))
