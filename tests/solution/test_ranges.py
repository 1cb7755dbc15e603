"""What a run over time tells of its laws: the films at its end, and what was left on the way."""

from __future__ import annotations

import numpy as np
import pytest
from solution.grids import grid, slab_text

from coldseam.answers.history import timed_answers
from coldseam.case.read import loads
from coldseam.errors import SolveError
from coldseam.physics.melting import heat_content
from coldseam.solution.heatsystem import heat_system
from coldseam.solution.refresh import refresher
from coldseam.solution.starting import starting_state
from coldseam.solution.transient import Transient

MESH = grid(np.linspace(0, 0.01, 3), np.array([0.0, 0.1]))
FREE = 'convection = { kind = "free", surface = "vertical", length = 100 }\nradiation = { emissivity = 0.9 }'
PLATE = slab_text(
    k=100, rho=500, c=900, start=80, air=20, length=10, width=100, duration=600, record=60, tolerance=0.1
).replace("film = 1", FREE)


def answers(text: str):
    system = heat_system(loads(text), MESH)
    made = Transient(
        system, starting_state(system), phase=heat_content(system.case, system.mesh), refresh=refresher(system)
    )
    while made.status == "running":
        made.step()
    return timed_answers(made.result(), {}, {"over_time": {"share": 0.01}}, (), {}), made


def test_films_at_the_end_stand_in_the_answers():
    """Their parts make the heat flow: convection and radiation at the last surface temperature, by Stefan and Boltzmann."""
    found, made = answers(PLATE)
    face = found.boundaries["face"]
    used, surface = face.film_used, float(made.state.temperature.max())
    assert 20.5 < surface < 60
    radiated = 0.1 * 0.9 * 5.670374419e-8 * (293.15**4 - (surface + 273.15) ** 4)
    assert used["radiation"]["heat_flow"] == pytest.approx(radiated, rel=1e-3)
    assert used["convection"]["heat_flow"] + radiated == pytest.approx(face.heat_flow, rel=5e-3)  # films move in 2e-3
    assert face.film == pytest.approx(used["film"]) and "Ra" in used["convection"]
    assert found.warnings == ()


def test_laws_left_on_the_way_are_named():
    """80 °C at the start is beyond both laws; at the end, at 21 °C, nothing is."""
    text = PLATE.replace("conductivity = 100", "conductivity = { table = [[0, 99], [50, 101]] }")
    text = text.replace("specific_heat = 900", "specific_heat = { polynomial = [900], range = [0, 40] }")
    found, _ = answers(text.replace("duration = 600", "duration = 7200"))
    assert len(found.warnings) == 2
    for what, warning in zip(
        ("conductivity", "specific heat"), sorted(found.warnings, key=lambda w: "specific" in w), strict=True
    ):
        assert f'range of the {what} of "stuff"' in warning and "to 80.0 °C" in warning and 'body "slab"' in warning


def test_a_film_beyond_its_correlation_is_named_with_its_time():
    text = PLATE.replace(FREE, 'convection = { kind = "forced", surface = "cylinder", length = 1, speed = 0.001 }')
    found, _ = answers(text)
    assert any('boundary "face": Re' in warning and "first at" in warning for warning in found.warnings)


def test_air_without_properties_ends_the_run():
    with pytest.raises(
        SolveError, match='boundary "face": its film is at .* the properties of air hold for -60 to 200'
    ):
        answers(PLATE.replace("start = 80", "start = 450"))
