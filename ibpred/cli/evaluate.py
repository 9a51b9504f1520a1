"""``ibpred evaluate``: numbers."""

from __future__ import annotations

import click

from ibpred.cli.common import Shared, emit, open_chain, parse_point, parse_powers, shared_options


@click.command()
@shared_options
@click.option("--at", "at", required=True, metavar="POINT", help='The point, "s=-1,t=-1/3".')
@click.option("--digits", type=click.IntRange(1, 2000), default=30, show_default=True, metavar="N")
@click.option(
    "--order", type=int, default=0, show_default=True, metavar="K", help="Highest power of eps wanted."
)
@click.option("--integral", "integrals", multiple=True, metavar="POWERS", help="[default: the masters]")
def evaluate(shared: Shared, at: str, digits: int, order: int, integrals: tuple[str, ...]) -> None:
    """Values of the masters, or of given integrals, as balls."""
    from ibpred.report.json_tables import values_data
    from ibpred.report.text import values_text

    point = parse_point(at)
    wanted = tuple(parse_powers(text, "--integral") for text in integrals)
    with open_chain(shared) as chain:
        values = chain.evaluate(point, wanted, order, digits)
        data = values_data(chain.definition, point, digits, values)
    emit(shared, data, lambda: values_text(data))
