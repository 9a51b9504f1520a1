"""Records to JSON data and back, driven by their type hints.

Exact values are text: a `Fraction` is ``"1/3"``; a `Rational` is ``["d,t", "(d-3)/t"]``, its ring
and its value; a type with a static method ``read`` is its text. Dataclasses are objects keyed by
field. Nothing is ever evaluated on the way back: the target type, known to the caller, decides how
each piece of data is read.
"""

from __future__ import annotations

import dataclasses
import types
from collections.abc import Mapping, Sequence
from enum import Enum
from fractions import Fraction
from functools import cache
from typing import Any, TypeVar, Union, get_args, get_origin, get_type_hints

from ibpred.digest import JsonData
from ibpred.errors import StoreError
from ibpred.exact.grammar import parse_rational
from ibpred.exact.rational import Rational, Ring, ring

R = TypeVar("R")


def to_data(value: Any) -> JsonData:
    """JSON data of a record.

    Raises
    ------
    TypeError
        For a value that has no exact form here (floats, arrays, ...).
    """
    if value is None or isinstance(value, (bool, int, str)):
        return value
    if isinstance(value, Fraction):
        return str(value)
    if isinstance(value, Rational):
        return [",".join(value.ring.names), str(value)]
    if isinstance(value, Ring):
        return ",".join(value.names)
    if isinstance(value, Enum):
        return to_data(value.value)
    if hasattr(value, "read"):
        return str(value)
    if dataclasses.is_dataclass(value) and not isinstance(value, type):
        return {f.name: to_data(getattr(value, f.name)) for f in dataclasses.fields(value)}
    if isinstance(value, Mapping):
        return [[to_data(key), to_data(item)] for key, item in value.items()]
    if isinstance(value, (set, frozenset)):
        return [to_data(item) for item in sorted(value)]
    if isinstance(value, (list, tuple)):
        return [to_data(item) for item in value]
    raise TypeError(f"{type(value).__name__} has no exact JSON form")


def from_data(kind: type[R], data: JsonData) -> R:
    """The record of type `kind` that `to_data` wrote.

    Raises
    ------
    StoreError
        If the data do not fit the type.
    """
    try:
        return _read(kind, data)  # type: ignore[no-any-return]
    except (KeyError, TypeError, ValueError, AttributeError, ZeroDivisionError, IndexError) as error:
        name = getattr(kind, "__name__", str(kind))
        raise StoreError(f"stored data do not fit a {name}: {error}") from error


@cache
def _hints(kind: type) -> dict[str, Any]:
    return get_type_hints(kind)


def _names(text: str) -> tuple[str, ...]:
    return tuple(text.split(",")) if text else ()


def _read(kind: Any, data: Any) -> Any:
    if kind is Any:
        return data
    if kind is Fraction:
        return Fraction(data)
    if kind is Rational:
        names, text = data
        return parse_rational(text, ring(_names(names)))
    if kind is Ring:
        return ring(_names(data))
    if kind in (int, str, bool, type(None)):
        if type(data) is not kind:
            raise TypeError(f"{data!r} is not of type {kind.__name__}")
        return data
    if isinstance(kind, type) and issubclass(kind, Enum):
        return kind(data)
    if hasattr(kind, "read"):
        return kind.read(data)
    if dataclasses.is_dataclass(kind):
        hints = _hints(kind)  # type: ignore[arg-type]
        return kind(**{f.name: _read(hints[f.name], data[f.name]) for f in dataclasses.fields(kind)})  # type: ignore[operator]
    origin, inner = get_origin(kind), get_args(kind)
    if origin in (Union, types.UnionType):
        return _read_union(inner, data)
    if origin is tuple:
        if len(inner) == 2 and inner[1] is Ellipsis:
            return tuple(_read(inner[0], item) for item in data)
        return tuple(_read(part, item) for part, item in zip(inner, data, strict=True))
    if origin in (list, Sequence):
        return [_read(inner[0], item) for item in data]
    if origin in (frozenset, set):
        return origin(_read(inner[0], item) for item in data)
    if isinstance(origin, type) and issubclass(origin, Mapping):
        return {_read(inner[0], key): _read(inner[1], item) for key, item in data}
    raise TypeError(f"records with fields of type {kind} are not read")


def _read_union(kinds: tuple[Any, ...], data: Any) -> Any:
    if data is None and type(None) in kinds:
        return None
    real = [kind for kind in kinds if kind is not type(None)]
    if len(real) == 2 and Rational in real:
        # a rational function is a list, a record an object
        real = [kind for kind in real if (kind is Rational) == isinstance(data, list)]
    if len(real) != 1:
        raise TypeError("a union of several record types is not read")
    return _read(real[0], data)
