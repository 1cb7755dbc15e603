"""Rows of a history in a file and in memory, and limits held against every step."""

from __future__ import annotations

import numpy as np
import pytest
from solution.grids import grid, run_on, slab_text, stepping

from coldseam.answers.history import timed_limits
from coldseam.errors import OutputError
from coldseam.solution.rows import Rows

MESH = grid(np.linspace(0.0, 1.0, 21), np.array([0.0, 0.1]))


def filled(count, path=None, every=3):
    rows = Rows(2)
    for n in range(count):
        rows.append(np.array([n, n / 3]))
        if path is not None and n % every == every - 1:
            rows.spill(path)
            assert not rows.waiting  # nothing stays in memory
    return rows


@pytest.mark.parametrize("count", [0, 1, 3, 8, 9])
def test_rows_are_the_same_from_a_file(tmp_path, count):
    rows = filled(count, tmp_path / "rows")
    assert len(rows) == count and rows.array().shape == (count, 2)
    assert np.array_equal(rows.array(), filled(count).array())
    assert rows.last_time == filled(count).last_time == (count - 1 if count else -np.inf)


def test_a_resumed_run_writes_over_what_came_after_its_checkpoint(tmp_path):
    filled(9, tmp_path / "rows")
    again = Rows(2)
    again.recall(tmp_path / "rows", 6)
    again.append(np.array([60.0, 61.0]))
    assert again.spill(tmp_path / "rows") == 7
    assert again.array()[:, 0].tolist() == [0, 1, 2, 3, 4, 5, 60]
    assert (tmp_path / "rows").stat().st_size == 7 * 16


def test_rows_that_are_gone_are_missed(tmp_path):
    with pytest.raises(OutputError, match="leave --resume out"):
        Rows(2).recall(tmp_path / "rows", 3)


def test_limits_see_what_no_row_shows():
    """A pulse of 1 K within 0.02 s, and a row every 0.5 s: the limit is broken although no row shows it."""
    pulse = "{ table = [[0, 0], [0.2, 0], [0.21, 1], [0.22, 0], [1, 0]] }"
    text = slab_text(film=100, start=0, record=0.5, tolerance=1e-3).replace("temperature = 0", f"temperature = {pulse}")
    text += '[[limit]]\nname = "warm"\nquantity = { boundary = "face", temperature = "max" }\nat_most = 0.3\n'
    text += '[[limit]]\nname = "flow"\nquantity = { space = "air", heat_flow = true }\nat_most = 0.5\n'
    text += '[[limit]]\nname = "out"\nquantity = { boundary = "face", heat_flow = true }\nat_least = -0.1\n'
    history = run_on(MESH, text)
    assert np.abs(history.column("boundary", "face")).max() < 0.1 and history.column("max", "face").max() < 0.1
    verdicts = timed_limits(history)
    assert not verdicts["warm"]["met"] and 0.3 < verdicts["warm"]["value"] < 1.0
    assert 0.2 < verdicts["warm"]["at"] < 0.24
    assert not verdicts["flow"]["met"] and verdicts["flow"]["at"] == pytest.approx(0.21, abs=0.01)
    assert not verdicts["out"]["met"] and verdicts["out"]["value"] < -0.1
    assert verdicts["flow"]["value"] == pytest.approx(history.totals.peak[0], rel=1e-12)


def test_a_run_begun_out_of_bounds_is_told():
    text = (
        slab_text(record=0.5)
        + '[[limit]]\nname = "p"\nquantity = { probe = "centre", temperature = true }\nat_most = 0.9\n'
    )
    verdict = timed_limits(run_on(MESH, text))["p"]
    assert verdict["value"] == 1.0 and verdict["at"] == 0.0 and not verdict["met"]


def test_no_limit_costs_nothing():
    assert stepping(MESH, slab_text()).extremes.positions == []
