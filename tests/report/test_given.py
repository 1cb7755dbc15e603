"""How a report tells in what way a run over time was stepped."""

from __future__ import annotations

from pathlib import Path

import pytest

from coldseam.case.read import load
from coldseam.report.given import computed
from coldseam.report.shown import Shown

USED = {"used": True, "vectors": 38, "checked_error": 5.2e-5, "allowed_error": 5e-4}


@pytest.mark.parametrize(
    ("reduced", "words"),
    [
        (USED, ("reduced model of 38 unknowns", "5.2e-05 K", "0.0005 K allowed")),
        ({"used": False, "why": "the equations are not linear"}, ("over all nodes", "the equations are not linear")),
    ],
)
def test_time_steps_are_told_with_their_checked_error(reduced, words):
    case, mesh = load(Path(__file__).parents[2] / "cases" / "cabinet-heating-up.toml"), Flat()
    answers = {"solver": {"method": "multigrid", "iterations": 812, "reduced": reduced}}
    page = str(computed(case, answers, mesh, Shown(system="metric", flat=True)))
    assert "iterations 812" in page and all(word in page for word in words)


class Flat:
    """As much of a mesh as the chapter asks for."""

    axisymmetric, dim, bodies = False, 2, ()
