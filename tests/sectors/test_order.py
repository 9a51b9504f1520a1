import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from ibpred.sectors.order import (
    dots,
    lines_of,
    order_columns,
    rank,
    sector_from_lines,
    sector_of,
    sort_key,
)

integrals = st.integers(1, 6).flatmap(
    lambda n: st.lists(st.lists(st.integers(-3, 3), min_size=n, max_size=n), min_size=1, max_size=30)
)


@given(integrals)
def test_vectorised_order_is_the_order(table):
    sorted_rows = [table[i] for i in order_columns(np.array(table))]
    assert sorted_rows == sorted(table, key=sort_key)


@given(integrals)
def test_order_is_total(table):
    keys = {sort_key(row) for row in table}
    assert len(keys) == len({tuple(row) for row in table})


def test_words():
    powers = (2, 0, -3, 1, -1)
    assert sector_of(powers) == 0b01001
    assert lines_of(0b01001) == (0, 3)
    assert sector_from_lines((3, 0)) == 0b01001
    assert (dots(powers), rank(powers)) == (1, 4)


def test_order_of_criteria():
    ascending = [
        (1, 1, 0, 0),  # few lines first, whatever their powers
        (5, 1, 0, 0),
        (1, 0, 1, 0),  # then the sector
        (1, 1, 1, 0),
        (1, 1, 1, -1),  # numerators before dots
        (1, 1, 1, -4),
        (2, 1, 1, 0),
        (2, 1, 1, -1),
    ]
    shuffled = [ascending[i] for i in (5, 2, 7, 0, 3, 6, 1, 4)]
    assert sorted(shuffled, key=sort_key) == ascending


def test_numerators_are_filled_from_the_left():
    assert sort_key((1, 1, -1, 0)) < sort_key((1, 1, 0, -1))
