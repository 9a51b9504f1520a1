"""Masters and reductions of several families as the JSON objects that the commands print."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from ibpred.family.members import Member
from ibpred.identities.quantities import Integral
from ibpred.reduction.masters import CommonMasters
from ibpred.reduction.sums import ReducedSums
from ibpred.report.text import integral_text, named_integral

Data = dict[str, Any]

TextTerms = Sequence[tuple[int, str]]
"""(index of a master, coefficient as text) of a combination."""


def integral_data(members: Sequence[Member], integral: Integral) -> Data:
    """An integral with its family, and its crossing where there is one."""
    number, powers = integral
    member = members[number]
    crossing = {} if member.crossing is None else {"crossing": member.crossing}
    return {"family": member.family, **crossing, "powers": list(powers)}


def _families(members: Sequence[Member]) -> list[str]:
    return [member.family for member in members if member.crossing is None]


def common_masters_data(members: Sequence[Member], masters: CommonMasters) -> Data:
    """What `masters` prints for several families."""
    return {
        "families": _families(members),
        "count": len(masters.masters),
        "masters": [
            {**integral_data(members, integral), "lines": sum(a > 0 for a in integral[1])}
            for integral in masters.masters
        ],
    }


def reduction_entry(
    members: Sequence[Member], masters: Sequence[Integral], integral: Integral, terms: TextTerms
) -> Data:
    """One integral in terms of the masters, of one family or several."""
    return {
        **integral_data(members, integral),
        "terms": [
            {"master": integral_data(members, masters[index]), "coefficient": text} for index, text in terms
        ],
    }


def common_reduction_data(
    members: Sequence[Member], masters: Sequence[Integral], reductions: Iterable[Data]
) -> Data:
    """What `reduce` prints for several families."""
    return {
        "families": _families(members),
        "masters": [integral_data(members, integral) for integral in masters],
        "reductions": list(reductions),
    }


def sums_data(members: Sequence[Member], found: ReducedSums) -> Data:
    """What `reduce` prints for sums."""
    return {
        "families": _families(members),
        "masters": [integral_data(members, integral) for integral in found.masters],
        "sums": [
            {
                "name": name,
                "terms": [
                    {
                        "master": integral_data(members, found.masters[index]),
                        "coefficient": value.factored_text(),
                    }
                    for index, value in combination
                ],
            }
            for name, combination in found.sums.items()
        ],
    }


def plain_entry(entry: Data) -> Data:
    """An entry of one family that is not crossed: masters by their powers alone."""
    terms = [{**term, "master": term["master"]["powers"]} for term in entry["terms"]]
    kept = {key: value for key, value in entry.items() if key != "family"}
    return {**kept, "terms": terms}


def without_families(data: Data) -> Data:
    """Reductions or sums of one family that is not crossed, in the shape that has its name once."""
    (name,) = data["families"]
    entries: Data = {
        key: [plain_entry(e) for e in data[key]] for key in ("reductions", "sums") if key in data
    }
    return {"family": name, "masters": [master["powers"] for master in data["masters"]], **entries}


@dataclass(frozen=True)
class Labelled:
    """Reductions or sums, of one family or several, by names alone.

    Attributes
    ----------
    masters
        Names of the masters, in order.
    rows
        Name of the integral or sum, and its terms (index of a master, coefficient).
    """

    masters: tuple[str, ...]
    rows: tuple[tuple[str, TextTerms], ...]


def labelled(data: Mapping[str, Any]) -> Labelled:
    """What `reduce` prints, in any of its shapes, by names."""
    one = str(data["family"]) if "family" in data else None

    def name(integral: Any) -> str:
        if one is not None:
            return integral_text(one, integral["powers"] if isinstance(integral, dict) else integral)
        return named_integral(integral)

    masters = tuple(name(master) for master in data["masters"])
    place = {master: index for index, master in enumerate(masters)}
    rows = []
    for entry in data["reductions"] if "reductions" in data else data["sums"]:
        terms = tuple((place[name(term["master"])], str(term["coefficient"])) for term in entry["terms"])
        rows.append((str(entry["name"]) if "name" in entry else name(entry), terms))
    return Labelled(masters, tuple(rows))
