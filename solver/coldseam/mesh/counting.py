"""Sorting integer keys by counting, in linear time and in compiled code."""

from __future__ import annotations

import numpy as np
from scipy import sparse


def counting_order(keys: np.ndarray, n_keys: int) -> np.ndarray:
    """Return the stable permutation that sorts integer keys in [0, n_keys), shape (n,).

    Turning a one-entry-per-row CSR matrix into CSC is a counting sort.

    >>> counting_order(np.array([2, 0, 1, 0]), 3).tolist()
    [1, 3, 2, 0]
    """
    n = len(keys)
    rows = sparse.csr_array((np.zeros(n, dtype=np.int8), keys, np.arange(n + 1, dtype=np.int32)), shape=(n, n_keys))
    return rows.tocsc().indices


def row_order(rows: np.ndarray, n_keys: int) -> np.ndarray:
    """Return the permutation that sorts integer rows lexicographically, rows of shape (n, m)."""
    order = counting_order(rows[:, -1], n_keys)
    for column in range(rows.shape[1] - 2, -1, -1):
        order = order[counting_order(rows[order, column], n_keys)]
    return order


def pair_order(first: np.ndarray, second: np.ndarray, n_keys: int, carried: np.ndarray) -> tuple[np.ndarray, ...]:
    """Sort pairs of integers in [0, n_keys) lexicographically and take a number along with each.

    A coordinate matrix turned into CSR and that into CSC is two counting sorts; nothing is summed.

    Parameters
    ----------
    first, second
        The pairs, shape (n,).
    n_keys
        Both are below it.
    carried
        Numbers to take along, shape (n,).

    Returns
    -------
    carried, second
        In the sorted order, shape (n,).
    start
        Where each value of ``first`` begins, shape (n_keys + 1,).

    >>> [found.tolist() for found in pair_order(np.array([1, 0, 1]), np.array([0, 2, 1]), 3, np.arange(3))]
    [[1, 0, 2], [2, 0, 1], [0, 1, 3, 3]]
    """
    pairs = sparse.coo_array((carried, (second, first)), shape=(n_keys, n_keys))
    pairs.has_canonical_format = True  # else tocsr would add up equal pairs
    sorted_pairs = pairs.tocsr().tocsc()
    return sorted_pairs.data, sorted_pairs.indices, sorted_pairs.indptr
