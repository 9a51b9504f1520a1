"""Reduction tables as JSON lines or CSV, row by row."""

from __future__ import annotations

import csv
import io
import json
from collections.abc import Iterable, Iterator
from typing import Any

from ibpred.report.text import named_integral

Data = dict[str, Any]


def json_lines(entries: Iterable[Data]) -> Iterator[str]:
    """One JSON object an integral or sum: its family and powers or its name, and its terms."""
    for entry in entries:
        yield json.dumps(entry, ensure_ascii=False) + "\n"


def csv_lines(entries: Iterable[Data]) -> Iterator[str]:
    """One line a term: integral (or name of a sum), master, coefficient; a vanishing one has ``,0``."""
    yield _csv_line(("integral", "master", "coefficient"))
    for entry in entries:
        name = entry["name"] if "name" in entry else named_integral(entry)
        for term in entry["terms"]:
            yield _csv_line((name, named_integral(term["master"]), term["coefficient"]))
        if not entry["terms"]:
            yield _csv_line((name, "", "0"))


def _csv_line(cells: tuple[str, ...]) -> str:
    target = io.StringIO()
    csv.writer(target, lineterminator="\n").writerow(cells)
    return target.getvalue()
