"""Values on curves and grids: JSON data and CSV text."""

from __future__ import annotations

import csv
import io
from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import Any

from ibpred.family.definition import FamilyDefinition
from ibpred.numerics.value import Value
from ibpred.report.json_tables import value_data

Data = dict[str, Any]
Point = Mapping[str, Fraction]


def grid_data(
    family: FamilyDefinition,
    axes: Mapping[str, Sequence[Fraction]],
    digits: int,
    values: Sequence[tuple[Point, Sequence[Value]]],
    left_out: Sequence[tuple[Point, str]],
    thresholds: Sequence[tuple[str, Fraction | float]],
) -> Data:
    """What `evaluate --grid` prints.

    Parameters
    ----------
    axes
        The invariants that vary, with their values.
    values
        The points with their integrals, in the order of the grid.
    left_out
        Points without values, and why.
    thresholds
        For a curve: (letter, place) of the singular points within the range.
    """
    return {
        "family": family.name,
        "digits": digits,
        "grid": {name: [str(value) for value in places] for name, places in axes.items()},
        "points": [
            {"point": _point(point), "integrals": [value_data(value) for value in of_point]}
            for point, of_point in values
        ],
        "left_out": [{"point": _point(point), "reason": reason} for point, reason in left_out],
        "thresholds": [{"letter": letter, "at": str(place)} for letter, place in thresholds],
    }


def _point(point: Point) -> dict[str, str]:
    return {name: str(value) for name, value in point.items()}


def grid_csv(data: Data) -> str:
    """One line for every point, integral and power of eps."""
    names = list(data["points"][0]["point"]) if data["points"] else list(data["grid"])
    file = io.StringIO()
    writer = csv.writer(file, lineterminator="\n")
    writer.writerow([*names, "integral", "order", "re", "im", "radius", "certified", "route"])
    for entry in data["points"]:
        place = [entry["point"][name] for name in names]
        for value in entry["integrals"]:
            powers = ",".join(map(str, value["powers"]))
            for order, ball in value["epsilon"].items():
                writer.writerow(
                    [
                        *place,
                        powers,
                        order,
                        ball["re"],
                        ball["im"],
                        ball["radius"],
                        "yes" if value["certified"] else "no",
                        value.get("route", ""),
                    ]
                )
    return file.getvalue()


def grid_text(data: Data) -> str:
    """A table for the terminal: ten digits of every coefficient."""
    lines = []
    for entry in data["points"]:
        lines.append(", ".join(f"{name} = {value}" for name, value in entry["point"].items()))
        for value in entry["integrals"]:
            powers = ",".join(map(str, value["powers"]))
            parts = [
                f"eps^{order}: {float(ball['re']):.9g} {float(ball['im']):+.9g} i"
                for order, ball in value["epsilon"].items()
            ]
            lines.append(f"  ({powers})  {';  '.join(parts) or '0'}")
    for entry in data["left_out"]:
        place = ", ".join(f"{name} = {value}" for name, value in entry["point"].items())
        lines.append(f"left out: {place}: {entry['reason']}")
    return "\n".join(lines)
