"""Records survive the way to JSON data and back."""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import dataclass
from enum import Enum
from fractions import Fraction

import pytest

from ibpred.digest import canonical_bytes, digest
from ibpred.errors import StoreError
from ibpred.exact.codec import from_data, to_data
from ibpred.exact.grammar import parse_rational
from ibpred.exact.rational import Rational, Ring, ring


@dataclass(frozen=True)
class Inner:
    value: Rational
    weight: Fraction | None


@dataclass(frozen=True)
class Outer:
    name: str
    ring: Ring
    table: Mapping[str, tuple[Inner, ...]]
    pair: tuple[int, str]
    members: frozenset[int]
    flag: bool


R = ring(("d", "t"))
RECORD = Outer(
    "box",
    R,
    {"t": (Inner(parse_rational("(d-3)/(t*(1+t)^2)", R), Fraction(-1, 3)), Inner(R.zero, None))},
    (3, "x"),
    frozenset({4, 1}),
    True,
)


def test_round_trip() -> None:
    data = to_data(RECORD)
    assert from_data(Outer, json.loads(canonical_bytes(data))) == RECORD
    assert digest(data) == digest(json.loads(canonical_bytes(data)))


@pytest.mark.parametrize("damage", [{"name": 3}, {"pair": [1]}, {"ring": 5}, {"flag": "yes"}])
def test_data_of_another_shape_are_refused(damage: dict[str, object]) -> None:
    data = dict(to_data(RECORD))  # type: ignore[call-overload]
    with pytest.raises(StoreError):
        from_data(Outer, {**data, **damage})


class Colour(Enum):
    RED = "red"
    BLUE = "blue"


@dataclass(frozen=True)
class Choice:
    colour: Colour
    either: Rational | Inner


@pytest.mark.parametrize("either", [R.one, Inner(R.one, None)])
def test_members_of_enumerations_and_of_unions(either: Rational | Inner) -> None:
    record = Choice(Colour.BLUE, either)
    assert from_data(Choice, json.loads(canonical_bytes(to_data(record)))) == record
    with pytest.raises(StoreError):
        from_data(Choice, {"colour": "green", "either": ["d", "1"]})


def test_floats_have_no_canonical_form() -> None:
    with pytest.raises(TypeError):
        canonical_bytes({"a": 0.5})  # type: ignore[dict-item]
