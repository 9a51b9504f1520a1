"""``ibpred evaluate``: numbers."""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path
from typing import TYPE_CHECKING

import click

from ibpred.cli.common import (
    Shared,
    each_family,
    emit,
    emit_each,
    open_chain,
    parse_point,
    parse_powers,
    several_families,
)
from ibpred.errors import InputError, PointError
from ibpred.exact.grammar import parse_number

if TYPE_CHECKING:
    from ibpred.family.definition import Powers
    from ibpred.run.chain.chain import Chain
    from ibpred.run.values.expansions import Approach
    from ibpred.run.values.grids import Axis


@click.command()
@several_families
@click.option("--at", "at", metavar="POINT", help='The point, "s=-1,t=-1/3".')
@click.option(
    "--grid",
    "grids",
    multiple=True,
    metavar="RANGE",
    help='Points along an invariant, "t=-0.9:-0.1:50" (first, last, how many); several make a grid.',
)
@click.option(
    "--approach",
    metavar="POINT",
    help='Expand in the distance h from a point, "t=0-": t = 0 - h ("t=0+": t = 0 + h).',
)
@click.option(
    "--terms", type=click.IntRange(-20, 500), default=3, show_default=True, metavar="N", help="Up to h^N."
)
@click.option("--csv", "csv_file", metavar="FILE", help="Write the values of a grid as CSV.")
@click.option(
    "--plot", "plot_file", metavar="FILE", help="Plot the values along one --grid (.svg, .png, .pdf)."
)
@click.option("--digits", type=click.IntRange(1, 2000), default=30, show_default=True, metavar="N")
@click.option(
    "--order", type=int, default=0, show_default=True, metavar="K", help="Highest power of eps wanted."
)
@click.option("--integral", "integrals", multiple=True, metavar="POWERS", help="[default: the masters]")
def evaluate(
    shared: Shared,
    at: str | None,
    grids: tuple[str, ...],
    approach: str | None,
    terms: int,
    csv_file: str | None,
    plot_file: str | None,
    digits: int,
    order: int,
    integrals: tuple[str, ...],
) -> None:
    """Values of the masters, or of given integrals, at a point, on a grid, or near a singular point.

    Of several families the masters of one after the other, at the same point.
    """
    from ibpred.report.json_tables import values_data
    from ibpred.report.text import values_text
    from ibpred.run.values.evaluate import evaluate_points

    if at is None and not grids and approach is None:
        raise InputError('no point: give --at "s=-1,t=-1/3" or --grid "t=-0.9:-0.1:50"')
    if grids and approach is not None:
        raise InputError("--grid and --approach do not go together")
    if not grids and (csv_file or plot_file):
        raise InputError("--csv and --plot need a --grid")
    point = parse_point(at) if at is not None else {}
    axes = tuple(parse_axis(text) for text in grids)
    wanted = tuple(parse_powers(text, "--integral") for text in integrals)
    if shared.others:
        if wanted or axes or approach is not None:
            raise InputError("of several families the masters are evaluated, at one point (--at)")
    elif approach is not None or axes:
        with open_chain(shared) as chain:
            if approach is not None:
                _near(shared, chain, point, approach, wanted, order, terms, digits)
            else:
                _on_grid(shared, chain, point, axes, wanted, order, digits, csv_file, plot_file)
        return
    found = []
    for family in each_family(shared):
        with open_chain(family) as chain:
            (values,) = evaluate_points(chain, (point,), wanted, order, digits)
            found.append(values_data(chain.definition, point, digits, values))
    emit_each(shared, found, values_text)


def parse_axis(text: str) -> Axis:
    """A range ``NAME=FIRST:LAST:COUNT``.

    Raises
    ------
    PointError
        If it is none.
    """
    from ibpred.run.values.grids import Axis

    name, equals, rest = text.partition("=")
    parts = rest.split(":")
    if not equals or not name.strip() or len(parts) != 3 or not parts[2].strip().isdigit():
        raise PointError(f'{text!r} is no range; write NAME=FIRST:LAST:COUNT, e.g. "t=-0.9:-0.1:50"')
    first, last, count = parse_number(parts[0].strip()), parse_number(parts[1].strip()), int(parts[2])
    if count < 2 or first == last:
        raise PointError(f"the range {text!r} needs two different ends and at least two points")
    step = Fraction(last - first, count - 1)
    return Axis(name.strip(), tuple(first + step * i for i in range(count)))


def parse_approach(text: str) -> Approach:
    """A point with a side, ``t=0-`` or ``s=4+``.

    Raises
    ------
    PointError
        If it is none.
    """
    from ibpred.run.values.expansions import Approach

    name, equals, rest = text.partition("=")
    rest = rest.strip()
    if not equals or not name.strip() or rest[-1:] not in ("+", "-") or len(rest) < 2:
        raise PointError(
            f'{text!r} is no point with a side; write "t=0-" for t = 0 - h, "t=0+" for t = 0 + h'
        )
    return Approach(name.strip(), parse_number(rest[:-1].strip()), 1 if rest[-1] == "+" else -1)


def _near(
    shared: Shared,
    chain: Chain,
    point: dict[str, Fraction],
    approach: str,
    wanted: tuple[Powers, ...],
    order: int,
    terms: int,
    digits: int,
) -> None:
    from ibpred.report.expansions import expansion_data, expansion_text
    from ibpred.run.values.expansions import expand

    goal = parse_approach(approach)
    found = expand(chain, point, goal, wanted, order, terms, digits)
    data = expansion_data(
        chain.definition,
        point,
        str(goal),
        terms,
        digits,
        [(e.powers, e.epsilon, e.certified, e.route) for e in found],
    )
    emit(shared, data, lambda: expansion_text(data))


def _on_grid(
    shared: Shared,
    chain: Chain,
    point: dict[str, Fraction],
    axes: tuple[Axis, ...],
    wanted: tuple[Powers, ...],
    order: int,
    digits: int,
    csv_file: str | None,
    plot_file: str | None,
) -> None:
    from ibpred.report.grids import grid_csv, grid_data, grid_text
    from ibpred.report.plots import check_plot, curve_figure
    from ibpred.run.storage.files import write_file
    from ibpred.run.values.grids import evaluate_grid

    kind = Path(plot_file).suffix.lstrip(".").lower() if plot_file else ""
    if plot_file:
        check_plot(kind, len(axes))
    grid = evaluate_grid(chain, point, axes, wanted, order, digits)
    data = grid_data(
        chain.definition,
        {axis.name: axis.values for axis in axes},
        digits,
        grid.values,
        grid.left_out,
        grid.thresholds,
    )
    if csv_file:
        write_file(Path(csv_file), grid_csv(data))
    if plot_file:
        write_file(Path(plot_file), curve_figure(data, kind))
    emit(shared, data, lambda: grid_text(data))
    if grid.stopped is not None:
        raise grid.stopped
