"""The text of a family file: parsed TOML, typed access to its entries, errors that show the place."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from ibpred.errors import ExpressionError, FamilyFileError
from ibpred.exact.grammar import nearest

Path = tuple[str | int, ...]
"""Where an entry is: table, number (0-based) in an array of tables, key. ``("line", 2, "momentum")``."""

_HEADER = re.compile(r"^\s*\[\[?\s*([A-Za-z0-9_.\-]+)\s*\]\]?\s*(#.*)?$")


@dataclass(frozen=True)
class Source:
    """A family file.

    Attributes
    ----------
    text, file
        The whole text, and the file's name for messages.
    data
        The TOML tables.
    """

    text: str
    file: str
    data: Mapping[str, Any]

    def error(
        self, problem: str, path: Path, value: str | None = None, occurrence: int = 0
    ) -> FamilyFileError:
        """The error for an entry.

        Parameters
        ----------
        problem
            What is wrong and what to do.
        path
            The entry; the empty path is the file as a whole.
        value
            The offending string inside the entry (one equation of several), if it is not all of it.
        occurrence
            Which one, where the same string stands several times in the entry.
        """
        found = _find(self.text.splitlines(), path, value, occurrence)
        line = None if found is None else found + 1
        entry = value
        if entry is None and found is not None:
            entry = self.text.splitlines()[found].strip()
        return FamilyFileError(problem, file=self.file, line=line, entry=entry)

    def expression_error(
        self, error: ExpressionError, path: Path, value: str | None = None, occurrence: int = 0
    ) -> FamilyFileError:
        """The same for an expression that cannot be read."""
        problem = f"{error.problem} (at character {error.position + 1} of {error.text!r})"
        return self.error(problem, path, value, occurrence)

    def table(self, path: Path, keys: Sequence[str]) -> Mapping[str, Any]:
        """A table (empty where it is missing) that may have only the given keys.

        Raises
        ------
        FamilyFileError
            If it is no table, or for an unknown key.
        """
        table = self._at(path)
        if table is None:
            return {}
        if not isinstance(table, dict):
            raise self.error(f"[{_name(path)}] must be a table", path)
        for key in table:
            if key not in keys:
                where = f" in [{_name(path)}]" if path else ""
                raise self.error(f"unknown key {key!r}{where}; {nearest(key, keys)}", (*path, key))
        return table

    def tables(self, name: str, keys: Sequence[str]) -> tuple[Mapping[str, Any], ...]:
        """An array of tables (empty where it is missing); keys as in `table`."""
        value = self.data.get(name)
        if value is None:
            return ()
        if not isinstance(value, list) or not all(isinstance(v, dict) for v in value):
            raise self.error(f"write each {name} as a table of its own, [[{name}]]", (name,))
        return tuple(self.table((name, i), keys) for i in range(len(value)))

    def string(self, path: Path) -> str | None:
        """A string, or None where the entry is missing."""
        value = self._at(path)
        if value is not None and not isinstance(value, str):
            raise self.error(f"{path[-1]} must be a text in quotes", path)
        return value

    def strings(self, path: Path) -> tuple[str, ...] | None:
        """A list of strings, or None where the entry is missing."""
        value = self._at(path)
        if value is None:
            return None
        if not isinstance(value, list) or not all(isinstance(v, str) for v in value):
            raise self.error(f"{path[-1]} must be a list of texts in quotes", path)
        return tuple(value)

    def integer(self, path: Path) -> int | None:
        """An integer, or None where the entry is missing."""
        value = self._at(path)
        if value is not None and (not isinstance(value, int) or isinstance(value, bool)):
            raise self.error(f"{path[-1]} must be an integer", path)
        return value

    def integers(self, path: Path) -> dict[str, int]:
        """A table of integers, empty where it is missing."""
        value = self._at(path)
        if value is None:
            return {}
        if not isinstance(value, dict):
            raise self.error(f"{path[-1]} must be a table of integers", path)
        return {key: self.integer((*path, key)) or 0 for key in value}

    def flag(self, path: Path) -> bool:
        """A truth value, false where the entry is missing."""
        value = self._at(path)
        if value is not None and not isinstance(value, bool):
            raise self.error(f"{path[-1]} must be true or false", path)
        return bool(value)

    def _at(self, path: Path) -> Any:
        value: Any = self.data
        for step in path:
            value = value[int(step)] if isinstance(value, list) else value.get(step)
            if value is None:
                return None
        return value


def parse_source(text: str, file: str) -> Source:
    """Parse the TOML of a family file.

    Raises
    ------
    FamilyFileError
        For a TOML syntax error.
    """
    try:
        return Source(text, file, tomllib.loads(text))
    except tomllib.TOMLDecodeError as error:
        place = re.search(r"\s*\(at line (\d+), column \d+\)", str(error))
        lines = text.splitlines()
        number = int(place.group(1)) if place else max(len(lines), 1)
        reason = str(error)[: place.start()] if place else str(error).removesuffix(" (at end of document)")
        entry = lines[number - 1].strip() if number <= len(lines) else None
        raise FamilyFileError(f"not valid TOML: {reason}", file=file, line=number, entry=entry) from None


def _name(path: Path) -> str:
    return ".".join(str(step) for step in path if isinstance(step, str))


def _find(lines: Sequence[str], path: Path, value: str | None, occurrence: int) -> int | None:
    """0-based number of the text line where an entry stands."""
    if not path:
        return None
    first, last = 0, len(lines)
    at: int | None = None
    rest = path
    headers = [(i, m.group(1)) for i, line in enumerate(lines) if (m := _HEADER.match(line))]
    names = [step for step in path if isinstance(step, str)]
    for depth in range(len(names), 0, -1):
        dotted = ".".join(names[:depth])
        starts = [i for i, name in headers if name == dotted]
        number = next((step for step in path if isinstance(step, int)), 0)
        if len(starts) > number:
            at = first = starts[number]
            last = next((i for i, _ in headers if i > at), len(lines))
            used = depth + (1 if len(path) > 1 and isinstance(path[1], int) else 0)
            rest = path[used:]
            first += 1
            break
    else:
        last = headers[0][0] if headers and len(path) == 1 else last
    for step in rest:
        if isinstance(step, int):
            continue
        pattern = re.compile(rf"(^|[\s{{,.])[\"']?{re.escape(step)}[\"']?\s*[=.]")
        found = next((i for i in range(first, last) if pattern.search(lines[i].split("#")[0])), None)
        if found is None:
            break
        at = first = found
    if value is not None:
        begin = at if at is not None else 0
        hits = [i for i in range(begin, last) for _ in range(lines[i].count(value))]
        if len(hits) > occurrence:
            return hits[occurrence]
    return at
