"""Expansions at singular points as JSON data and text."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import Any

from ibpred.balls.decimal import DecimalBall
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.report.text import integral_text

Data = dict[str, Any]
Terms = Mapping[tuple[int, int], DecimalBall]


def expansion_data(
    family: FamilyDefinition,
    fixed: Mapping[str, Fraction],
    distance: str,
    highest: int,
    digits: int,
    expansions: Sequence[tuple[Powers, Mapping[int, Terms]]],
) -> Data:
    """What `evaluate --approach` prints.

    Parameters
    ----------
    fixed
        The invariants that stay.
    distance
        What h is, e.g. ``t = 0 - h``.
    highest
        The highest power of h kept.
    expansions
        Powers of the integral, and power of eps -> (power of h, power of log h) -> coefficient.
    """
    return {
        "family": family.name,
        "point": {name: str(value) for name, value in fixed.items()},
        "distance": distance,
        "terms": highest,
        "digits": digits,
        "integrals": [
            {
                "powers": list(powers),
                "epsilon": {
                    str(order): [
                        {"power": a, "log": b, "re": ball.re, "im": ball.im, "radius": ball.radius}
                        for (a, b), ball in sorted(terms.items())
                    ]
                    for order, terms in sorted(epsilon.items())
                },
                "certified": True,
                "route": "epsilon-form",
            }
            for powers, epsilon in expansions
        ],
    }


def expansion_text(data: Data) -> str:
    """One power of eps a line, in powers of h and log(h)."""
    fixed = ", ".join(f"{name} = {value}" for name, value in data["point"].items())
    lines = [f"{data['distance']}, h -> 0+" + (f", at {fixed}" if fixed else "")]
    for value in data["integrals"]:
        lines += ["", f"{integral_text(data['family'], value['powers'])}   (rigorous balls)"]
        for order, terms in value["epsilon"].items():
            parts = [_term(term) for term in terms]
            lines.append(f"  eps^{order}  " + (" + ".join(parts) or "0") + f" + O(h^{data['terms'] + 1})")
    return "\n".join(lines)


def _term(term: Data) -> str:
    number = term["re"] if term["im"] == "0" else f"({term['re']} + {term['im']} i)"
    factors = [number]
    if term["power"]:
        factors.append("h" if term["power"] == 1 else f"h^{term['power']}")
    if term["log"]:
        factors.append("log(h)" if term["log"] == 1 else f"log(h)^{term['log']}")
    return " ".join(factors)
