"""The entry ``region`` of [kinematics]: where the family is to be solved, ``["s > 0", "t < 0"]``."""

from __future__ import annotations

import re
from collections.abc import Collection, Mapping

from ibpred.exact.grammar import nearest
from ibpred.family.source import Path, Source

_PATH: Path = ("kinematics", "region")
_SIGN = re.compile(r"\s*(?P<name>\w+)\s*(?P<side>[<>])\s*0\s*")


def read_region(
    source: Source, invariants: Mapping[str, int], masses: Collection[str]
) -> tuple[tuple[str, int], ...]:
    """Read the entry; nothing where it is missing.

    Parameters
    ----------
    source
        The family file.
    invariants
        Mass dimensions of the invariants.
    masses
        Those that occur in the squared mass of a line.

    Returns
    -------
    tuple
        (invariant, +1 or -1) for those that are named.

    Raises
    ------
    FamilyFileError
        If an entry is no sign of an invariant, one is named twice, a squared mass is negative, the family has
        no ratio whose sign could matter, or variables are given as well.
    """
    texts = source.strings(_PATH)
    if texts is None:
        return ()
    if len(invariants) < 2:
        raise source.error("a region is a choice of signs of ratios; this family has no ratio", _PATH)
    if "variables" in source.data:
        raise source.error("give either a region or [variables], which say themselves where they hold", _PATH)
    found: dict[str, int] = {}
    for text in texts:
        match = _SIGN.fullmatch(text)
        if match is None:
            raise source.error('write signs of invariants, e.g. region = ["s > 0", "t < 0"]', _PATH, text)
        name, sign = match["name"], 1 if match["side"] == ">" else -1
        if name not in invariants:
            raise source.error(f"{name!r} is no invariant; {nearest(name, tuple(invariants))}", _PATH, text)
        if name in found:
            raise source.error(f"the sign of {name} is given twice", _PATH, text)
        if name in masses and sign < 0:
            raise source.error(f"the squared mass {name} is positive", _PATH, text)
        found[name] = sign
    return tuple(found.items())
