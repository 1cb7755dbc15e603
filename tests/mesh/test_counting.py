"""Counting sorts against numpy's own."""

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from coldseam.mesh.counting import counting_order, pair_order, row_order


@given(st.lists(st.integers(0, 9), max_size=60))
def test_counting_order_is_the_stable_order(keys):
    keys = np.array(keys, dtype=np.int64)
    assert np.array_equal(counting_order(keys, 10), np.argsort(keys, kind="stable"))


@given(st.integers(1, 4), st.integers(0, 40), st.integers(0, 2**32 - 1))
def test_row_order_is_lexicographic_and_stable(width, length, seed):
    rows = np.random.default_rng(seed).integers(0, 5, (length, width))
    assert np.array_equal(row_order(rows, 5), np.lexsort(rows.T[::-1]))


def test_row_order_reaches_the_last_key():
    rows = np.array([[999, 0], [0, 999], [0, 0]])
    assert row_order(rows, 1000).tolist() == [2, 1, 0]


@given(st.integers(0, 60), st.integers(0, 2**32 - 1))
def test_pair_order_is_lexicographic_stable_and_carries_along(length, seed):
    first, second = np.random.default_rng(seed).integers(0, 6, (2, length))
    carried, sorted_second, start = pair_order(first, second, 7, np.arange(length))
    expected = np.lexsort([second, first])
    assert np.array_equal(carried, expected)
    assert np.array_equal(sorted_second, second[expected])
    assert np.array_equal(np.diff(start), np.bincount(first, minlength=7))
