"""Masters and reductions of several families as the JSON objects that the commands print."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from ibpred.family.members import Member
from ibpred.identities.quantities import Integral
from ibpred.reduction.masters import CommonMasters
from ibpred.reduction.several import CommonTable

Data = dict[str, Any]


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


def common_reduction_data(members: Sequence[Member], table: CommonTable) -> Data:
    """What `reduce` prints for several families."""
    return {
        "families": _families(members),
        "masters": [integral_data(members, integral) for integral in table.masters],
        "reductions": [
            {
                **integral_data(members, integral),
                "terms": [
                    {
                        "master": integral_data(members, table.masters[index]),
                        "coefficient": value.factored_text(),
                    }
                    for index, value in combination
                ],
            }
            for integral, combination in table.reductions.items()
        ],
    }


def without_families(data: Data) -> Data:
    """The reductions of one family that is not crossed, in the shape that has its name once."""
    (name,) = data["families"]
    return {
        "family": name,
        "masters": [master["powers"] for master in data["masters"]],
        "reductions": [
            {
                "powers": reduction["powers"],
                "terms": [{**term, "master": term["master"]["powers"]} for term in reduction["terms"]],
            }
            for reduction in data["reductions"]
        ],
    }
