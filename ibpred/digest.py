"""Canonical bytes of JSON data, and their digest: the key under which a result is stored."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping, Sequence
from typing import Union

JsonData = Union[None, bool, int, str, Sequence["JsonData"], Mapping[str, "JsonData"]]


def canonical_bytes(data: JsonData) -> bytes:
    """The same bytes for equal data: sorted keys, no white space, UTF-8.

    Raises
    ------
    TypeError
        If the data hold something that has no exact, ordered JSON form (floats included).
    """
    _refuse_inexact(data)
    return json.dumps(data, sort_keys=True, separators=(",", ":"), ensure_ascii=False).encode()


def digest(data: JsonData) -> str:
    """SHA-256 of the canonical bytes, in hexadecimal."""
    return hashlib.sha256(canonical_bytes(data)).hexdigest()


def _refuse_inexact(data: JsonData) -> None:
    if data is None or isinstance(data, (bool, int, str)):
        return
    if isinstance(data, Mapping):
        for key, value in data.items():
            if not isinstance(key, str):
                raise TypeError(f"a key must be text, not {key!r}")
            _refuse_inexact(value)
        return
    if isinstance(data, (list, tuple)):
        for value in data:
            _refuse_inexact(value)
        return
    raise TypeError(f"{type(data).__name__} has no canonical form")
