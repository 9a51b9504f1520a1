"""Expansions at singular points as JSON data and text."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import Any

from ibpred.balls.decimal import DecimalBall
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.numerics.value import Route
from ibpred.report.text import accuracy_text, integral_text

Data = dict[str, Any]
Terms = Mapping[tuple[Fraction, int], DecimalBall]


def expansion_data(
    family: FamilyDefinition,
    fixed: Mapping[str, Fraction],
    distance: str,
    highest: int,
    digits: int,
    expansions: Sequence[tuple[Powers, Mapping[int, Terms], bool, Route]],
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
        Powers of the integral, power of eps -> (power of h, power of log h) -> coefficient, whether the radii
        are rigorous, and how the values were obtained. Powers of h that are no integers are written as text.
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
                        {"power": _power(a), "log": b, "re": ball.re, "im": ball.im, "radius": ball.radius}
                        for (a, b), ball in sorted(terms.items())
                    ]
                    for order, terms in sorted(epsilon.items())
                },
                "certified": certified,
                "route": route.value,
            }
            for powers, epsilon, certified, route in expansions
        ],
    }


def _power(power: Fraction) -> int | str:
    return int(power) if power.denominator == 1 else str(power)


def expansion_text(data: Data) -> str:
    """One power of eps a line, in powers of h and log(h)."""
    fixed = ", ".join(f"{name} = {value}" for name, value in data["point"].items())
    lines = [f"{data['distance']}, h -> 0+" + (f", at {fixed}" if fixed else "")]
    for value in data["integrals"]:
        label = integral_text(data["family"], value["powers"])
        lines += ["", f"{label}   ({accuracy_text(value)})"]
        for order, terms in value["epsilon"].items():
            parts = [_term(term) for term in terms]
            total = " + ".join(parts).replace("+ -", "- ") or "0"
            lines.append(f"  eps^{order}  {total} + O(h^{data['terms'] + 1})")
    return "\n".join(lines)


def _term(term: Data) -> str:
    number = term["re"] if term["im"] == "0" else f"({term['re']} + {term['im']} i)"
    factors = [number]
    if term["power"]:
        power = term["power"] if isinstance(term["power"], int) else f"({term['power']})"
        factors.append("h" if power == 1 else f"h^{power}")
    if term["log"]:
        factors.append("log(h)" if term["log"] == 1 else f"log(h)^{term['log']}")
    return " ".join(factors)
