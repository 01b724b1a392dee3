"""Keys as numbers, and rows put in order, against dictionaries and sorting as Python has them."""

from __future__ import annotations

import itertools

import numpy as np
import pyarrow as pa
import pytest
from hypothesis import given
from hypothesis import strategies as st

from bedplan.data.files.blocks import BLOCK_ROWS, in_blocks, order_of, taken
from bedplan.data.values.keys import read_keys

KEYS = st.one_of(
    st.none(),
    st.from_regex(r"P\d{3}", fullmatch=True),
    st.text("AB9 é\t", max_size=6),
    st.text("abcdef0123456789", min_size=15, max_size=24),
)


@given(st.lists(KEYS, max_size=40), st.integers(1, 5))
def test_equal_keys_have_equal_numbers_and_no_others_do(keys: list[str | None], parts: int) -> None:
    """Two rows share a number exactly where their keys, spaces around them left out, are the same and not blank."""
    column = pa.chunked_array([keys[first::parts] for first in range(parts)], pa.string())
    tidy = [(key or "").strip() for key in column.to_pylist()]
    codes = read_keys(column).codes.tolist()

    for (one, code), (other, second) in itertools.combinations(zip(tidy, codes, strict=True), 2):
        assert (code == second) == (one == other != "")


@given(st.lists(KEYS, min_size=1, max_size=40))
def test_shown_codes_are_a_shuffle(keys: list[str | None]) -> None:
    """Every number of a key stands for one random code, and no two for the same."""
    read = read_keys(pa.chunked_array([keys], pa.string()))

    assert sorted(read.random.tolist()) == list(range(read.random.size))
    assert read.codes.max() < read.random.size


@pytest.mark.parametrize("key", ["TEST01", "dummy 3", "ZZZ9", "a-training-1", "te\u017ft1", "Dummy"])
def test_test_patients_are_found_among_plain_keys(key: str) -> None:
    """The glance that spares most files a search overlooks none, in capitals or in letters of other alphabets."""
    column = pa.chunked_array([["P1", "P2"], ["P3", key, "P4"]], pa.string())

    assert read_keys(column).tests.tolist() == [3]


@given(st.lists(st.integers(-5, 5) | st.integers(-(2**62), 2**62), max_size=60))
def test_order_is_that_of_a_stable_sort(values: list[int]) -> None:
    """Small numbers are packed with their rows and large ones are not; both come out in Python's own order."""
    assert order_of(np.array(values, dtype=np.int64)).tolist() == sorted(range(len(values)), key=values.__getitem__)


@given(
    st.lists(st.integers(-3, 9), max_size=12)
    | st.tuples(st.integers(-3, 4), st.integers(4, 10)).map(lambda to: list(range(*to)))
)
def test_rows_are_fetched_as_numpy_does(which: list[int]) -> None:
    """Rows in any order, repeated, counted from the end, or one after the other, come out as indexing gives them."""
    values = np.arange(10) * 7

    assert taken(values, np.array(which, dtype=np.int64)).tolist() == [int(values[place]) for place in which]


def test_blocks_cover_every_row_once_and_in_order() -> None:
    """Rows are neither lost nor repeated where blocks meet."""
    rows = 2 * BLOCK_ROWS + 7
    which = np.arange(rows)[::-1]

    assert np.concatenate(in_blocks(rows, np.arange(rows).__getitem__)).tolist() == list(range(rows))
    assert (taken(np.arange(rows), which) == which).all()
    assert in_blocks(0, which.__getitem__) == []
