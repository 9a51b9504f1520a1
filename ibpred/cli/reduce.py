"""``ibpred reduce``: integrals to masters."""

from __future__ import annotations

from pathlib import Path

import click

from ibpred.cli.common import Shared, emit, open_joint, parse_integral, parse_list_file, several_families
from ibpred.errors import InputError


@click.command()
@several_families
@click.option(
    "--integral",
    "integrals",
    multiple=True,
    metavar="POWERS",
    help='An integral, "1,1,1,-1"; of several families "box(1,1,1,-1)"; crossed "box.u(1,1,1,-1)".',
)
@click.option("--list", "list_file", metavar="FILE", help="A file with one integral a line.")
@click.option("--max-dots", type=click.IntRange(min=0), metavar="A", help="All integrals with <= A dots.")
@click.option("--max-rank", type=click.IntRange(min=0), metavar="B", help="All integrals with rank <= B.")
@click.option("--by-cuts", is_flag=True, help="One cut after the other: the same table, less memory.")
def reduce(
    shared: Shared,
    integrals: tuple[str, ...],
    list_file: str | None,
    max_dots: int | None,
    max_rank: int | None,
    by_cuts: bool,
) -> None:
    """Reduce integrals to master integrals, those of several families to common ones."""
    from ibpred.report.json_common import common_reduction_data, without_families
    from ibpred.report.text import common_reduction_text

    named = [parse_integral(text, "--integral") for text in integrals]
    if list_file is not None:
        named += parse_list_file(Path(list_file))
    everything = max_dots is not None or max_rank is not None
    if not named and not everything:
        raise InputError("nothing to reduce: give --integral, --list, or --max-dots and --max-rank")
    with open_joint(shared) as joint:
        wanted = [joint.integral(each) for each in named]
        if everything:
            wanted += joint.integrals_within(max_dots or 0, max_rank or 0)
        table = joint.reduction(tuple(dict.fromkeys(wanted)), by_cuts)
        data = common_reduction_data(joint.members, table)
        crossed = any(joint.members[number].crossing for number, _ in (*wanted, *table.masters))
    shaped = data if shared.others or crossed else without_families(data)
    emit(shared, shaped, lambda: common_reduction_text(data))
