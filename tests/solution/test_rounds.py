"""How fast the refinement rounds narrow the intervals, from case file to proof."""

import numpy as np
import pytest
from published import runs

from coldseam.case import read
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


def test_one_space_round_a_heated_disc_is_proven():
    """All of the source leaves through the only boundary; its reading is a uniform field, whose gap is rounding alone."""
    text = """
    title = "disc"
    [model]
    dimensions = 2
    accuracy = "1 %"
    [spaces.air]
    temperature = 20
    film = 20
    [materials.solid]
    conductivity = 0.5
    [[body]]
    name = "disc"
    material = "solid"
    disc = { center = [0, 0], radius = 100 }
    heat_source = 2
    [[boundary]]
    name = "rim"
    on = "rest"
    space = "air"
    """
    answers = run(read.loads(text)).answers.as_dict()
    assert answers["spaces"]["air"]["heat_flow"] == pytest.approx(-2.0, rel=1e-6)
    # Exact: T = T_air + q / (2 pi r h) at the rim.
    assert answers["boundaries"]["rim"]["temperature"]["mean"] == pytest.approx(20 + 2 / (2 * np.pi * 0.1 * 20), abs=0.01)
