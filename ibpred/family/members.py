"""Several families that are reduced together, with the crossings that their files declare."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from ibpred.errors import InputError
from ibpred.family.crossings import crossed
from ibpred.family.definition import FamilyDefinition, Powers


@dataclass(frozen=True)
class Member:
    """One of several families, or one of them after a crossing.

    Attributes
    ----------
    family
        Name of the family as the user knows it.
    crossing
        Name of the crossing, None for the family itself.
    definition
        Its lines after the crossing; named ``family`` or ``family.crossing``.
    """

    family: str
    crossing: str | None
    definition: FamilyDefinition


def members_of(families: Sequence[FamilyDefinition]) -> tuple[Member, ...]:
    """The families, each followed by its crossings.

    Raises
    ------
    InputError
        Unless the families have names of their own and agree in the number of loops, the dimension, the
        external momenta and the kinematics.
    """
    found: list[Member] = []
    for family in families:
        _check_same(families[0], family)
        found.append(Member(family.name, None, family))
        found += [Member(family.name, c.name, crossed(family, c)) for c in family.crossings]
    names = [member.definition.name for member in found]
    for name in names:
        if names.count(name) > 1:
            raise InputError(f"two families are called {name}; rename one of the files")
    return tuple(found)


def integral_text(name: str, powers: Powers) -> str:
    """An integral as text, ``box(1,1,1,1)``; a crossed one is ``box.u(1,1,1,1)``."""
    return f"{name}({','.join(map(str, powers))})"


def read_integral(text: str, source: str) -> tuple[str | None, Powers]:
    """An integral, ``1,1,1,-1`` or with its family ``box(1,1,1,-1)``; crossed ``box.u(1,1,1,-1)``.

    Parameters
    ----------
    text
        The integral.
    source
        Where it stands, for the message.

    Raises
    ------
    InputError
        If the powers are no comma-separated list of integers.
    """
    name, inner = None, text.strip()
    if inner.endswith(")") and "(" in inner:
        name, inner = inner[: inner.index("(")].strip() or None, inner[inner.index("(") + 1 : -1]
    try:
        return name, tuple(int(part) for part in inner.split(","))
    except ValueError:
        raise InputError(
            f"{source}: {text!r} is no integral; give the powers separated by commas, e.g. 1,1,1,-1"
        ) from None


def _check_same(first: FamilyDefinition, other: FamilyDefinition) -> None:
    def differ(what: str, ours: object, theirs: object) -> InputError:
        return InputError(
            f"{first.name} and {other.name} cannot be reduced together: {what} differ, {ours} and {theirs}"
        )

    def listed(names: Sequence[str]) -> str:
        return ", ".join(names) or "none"

    if len(first.loops) != len(other.loops):
        raise differ("the numbers of loops", len(first.loops), len(other.loops))
    if first.dimension != other.dimension:
        raise differ("the dimensions", first.dimension, other.dimension)
    if first.external != other.external:
        raise differ("the external momenta", listed(first.external), listed(other.external))
    if first.invariants != other.invariants:
        ours, theirs = (
            listed([f"{v.name} (dimension {v.dimension})" for v in family.invariants])
            for family in (first, other)
        )
        raise differ("the invariants", ours, theirs)
    if first.unit != other.unit:
        raise differ("the units", first.unit, other.unit)
    for e, a in enumerate(first.external):
        for f, b in enumerate(first.external[e:], start=e):
            if first.gram[e][f] != other.gram[e][f]:
                raise differ(f"the products {a}*{b}", first.gram[e][f], other.gram[e][f])
