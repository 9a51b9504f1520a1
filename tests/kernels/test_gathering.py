"""Numbering of codes and sorted rows against dictionaries and sorted lists."""

from __future__ import annotations

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from ibpred.kernels.gathering import Numbering, count_entries, scatter_entries, sort_rows

CODES = st.lists(st.lists(st.integers(-3, 40) | st.integers(-(2**62), 2**62), max_size=60), max_size=5)


@given(CODES)
@settings(max_examples=50, deadline=None)
def test_codes_are_numbered_as_they_are_met(batches: list[list[int]]) -> None:
    numbering, known = Numbering(), {}
    for batch in batches:
        expected = [known.setdefault(code, len(known)) for code in batch]
        assert numbering.numbers(np.array(batch, np.int64)).tolist() == expected
    assert numbering.codes.tolist() == list(known)


def test_numbering_grows() -> None:
    codes = np.random.default_rng(0).integers(-(2**62), 2**62, 300_000)
    numbering = Numbering()
    first = numbering.numbers(codes)
    assert (numbering.codes[first] == codes).all()
    assert len(numbering) == len(np.unique(codes))
    assert (numbering.numbers(codes[::-1].copy()) == first[::-1]).all()


def test_rows_of_any_length_are_sorted() -> None:
    source = np.random.default_rng(1)
    lengths = [0, 1, 47, 48, 49, 300, 5]
    rows = [source.permutation(1000)[:n] for n in lengths]
    place = source.permutation(len(rows))
    row = np.repeat(np.arange(len(rows)), lengths).astype(np.int32)
    number = np.concatenate(rows).astype(np.int32)
    mixed = source.permutation(len(row))
    row, number = row[mixed], number[mixed]
    column = np.where(np.arange(1000) % 3 == 0, -1, np.arange(1000)).astype(np.int32)
    counts, occurs = np.zeros(len(rows), np.int64), np.zeros(1000, np.bool_)
    count_entries(row, number, column, place, counts, occurs)
    start = np.concatenate([[0], np.cumsum(counts)])
    columns, coefficients = np.empty(start[-1], np.int32), np.empty(start[-1], np.int32)
    scatter_entries(row, number, number + 7, column, place, start[:-1].copy(), columns, coefficients)
    sort_rows(start, columns, coefficients)
    for r, wanted in enumerate(rows):
        expected = sorted((int(c) for c in wanted if c % 3), reverse=True)
        at = slice(start[place[r]], start[place[r] + 1])
        assert columns[at].tolist() == expected
        assert coefficients[at].tolist() == [c + 7 for c in expected]
        assert occurs[expected].all()
    assert not occurs[::3].any()
