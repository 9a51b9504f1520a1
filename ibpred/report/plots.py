"""Plots of values along a curve: real and imaginary part by order in eps, errors as bands."""

from __future__ import annotations

import io
from fractions import Fraction
from typing import TYPE_CHECKING, Any

from ibpred.errors import InputError
from ibpred.report.text import integral_text

if TYPE_CHECKING:
    from matplotlib.axes import Axes

Data = dict[str, Any]

_KINDS = ("svg", "png", "pdf")
_MOST_INTEGRALS = 40


def check_plot(kind: str, axes: int) -> None:
    """Refuse a plot that cannot be made, before its values are computed.

    Raises
    ------
    InputError
        If the kind is unknown, or what varies is not one invariant.
    """
    if kind not in _KINDS:
        raise InputError(
            f"plots are written as {', '.join(_KINDS)}, not as {kind or 'a file without ending'!r}"
        )
    if axes != 1:
        raise InputError("a plot needs exactly one --grid; fix the other invariants with --at")


def curve_figure(data: Data, kind: str) -> bytes:
    """A figure with one row an integral: real part at the left, imaginary part at the right.

    Parameters
    ----------
    data
        A grid in one invariant (see `ibpred.report.grids.grid_data`).
    kind
        ``svg``, ``png`` or ``pdf``.

    Raises
    ------
    InputError
        If the grid is no curve, holds no values or too many integrals, or the kind is unknown.
    """
    check_plot(kind, len(data["grid"]))
    if not data["points"]:
        raise InputError("there is no point with values to plot")
    count = len(data["points"][0]["integrals"])
    if count > _MOST_INTEGRALS:
        raise InputError(
            f"a plot of {count} integrals is unreadable; choose at most {_MOST_INTEGRALS} with --integral"
        )
    from matplotlib import rc_context
    from matplotlib.figure import Figure

    (variable,) = data["grid"]
    with rc_context({"svg.hashsalt": "ibpred", "svg.fonttype": "path"}):
        figure = Figure(figsize=(10, 2.6 * count + 0.6), layout="constrained")
        grid = figure.subplots(count, 2, squeeze=False, sharex=True)
        for row in range(count):
            _integral(grid[row, 0], data, row, variable, "re")
            _integral(grid[row, 1], data, row, variable, "im")
            powers = data["points"][0]["integrals"][row]["powers"]
            grid[row, 0].set_title(f"Re {integral_text(data['family'], powers)}", fontsize=9)
            grid[row, 1].set_title(f"Im {integral_text(data['family'], powers)}", fontsize=9)
            grid[row, 0].legend(fontsize=7)
        for axes in grid[-1]:
            axes.set_xlabel(variable)
        file = io.BytesIO()
        metadata = {"svg": {"Date": None}, "pdf": {"CreationDate": None}, "png": {}}[kind]
        figure.savefig(file, format=kind, metadata=metadata)
    return file.getvalue()


def _integral(axes: Axes, data: Data, row: int, variable: str, part: str) -> None:
    orders = sorted({int(order) for entry in data["points"] for order in entry["integrals"][row]["epsilon"]})
    places = [float(Fraction(entry["point"][variable])) for entry in data["points"]]
    thresholds = [float(Fraction(entry["at"])) for entry in data["thresholds"]]
    for order in orders:
        values, radii = [], []
        for entry in data["points"]:
            ball = entry["integrals"][row]["epsilon"].get(str(order))
            values.append(float(ball[part]) if ball else 0.0)
            radii.append(float(ball["radius"]) if ball else 0.0)
        _broken_line(axes, places, values, radii, thresholds, rf"$\epsilon^{{{order}}}$")
    for at in thresholds:
        axes.axvline(at, color="0.6", linestyle=":", linewidth=1)
    if part == "re":
        for entry in data["thresholds"]:
            at = float(Fraction(entry["at"]))
            label = f" {entry['letter']} = 0"
            place = axes.get_xaxis_transform()
            axes.text(at, 0.98, label, fontsize=6, rotation=90, va="top", transform=place)


def _broken_line(
    axes: Axes, places: list[float], values: list[float], radii: list[float], breaks: list[float], label: str
) -> None:
    """A curve that is interrupted at the singular points."""
    colour = None
    for low, high in zip([float("-inf"), *sorted(breaks)], [*sorted(breaks), float("inf")], strict=True):
        chosen = sorted((x, y, r) for x, y, r in zip(places, values, radii, strict=True) if low < x < high)
        if not chosen:
            continue
        x, y, r = (list(column) for column in zip(*chosen, strict=True))
        marker = "." if len(x) < 40 else ""
        (line,) = axes.plot(
            x, y, marker=marker, linewidth=1.2, color=colour, label=label if colour is None else None
        )
        colour = line.get_color()
        lower = [a - b for a, b in zip(y, r, strict=True)]
        upper = [a + b for a, b in zip(y, r, strict=True)]
        axes.fill_between(x, lower, upper, color=colour, alpha=0.25, linewidth=0)
