"""How fast the refinement rounds narrow the intervals, from case file to proof."""

import numpy as np
import pytest
from published import runs

from coldseam.study import run


def rate(stem: str, accuracy: float) -> float:
    """Return p of width ~ nodes^-p over the rounds of a published case after the first (coarse) one."""
    result = run(runs.case_of(runs.HERE / f"{stem}.toml", (("model.accuracy", accuracy),)))
    rounds = result.solution.rounds[1:]
    assert result.solution.flows_met and len(rounds) >= 2
    nodes, errors = (np.log([getattr(entry, name) for entry in rounds]) for name in ("nodes", "error"))
    return -np.polyfit(nodes, errors, 1)[0]


def test_intervals_of_sections_narrow_with_the_nodes():
    """Best possible: width ~ h² ~ 1/N, whatever the corner."""
    assert rate("edge", 0.0005) >= 0.9


@pytest.mark.slow
def test_intervals_of_solids_narrow_with_the_nodes():
    """Best possible: width ~ h² ~ N^(-2/3)."""
    assert rate("corner", 0.004) >= 0.6
