"""Other temperatures from the unit fields: the same numbers as a run of their own on the same mesh."""

from __future__ import annotations

import numpy as np
import pytest

from coldseam.case import read
from coldseam.errors import CaseError
from coldseam.solution.steady import solve_on
from coldseam.study import run

NEW = {"left": 5.0, "outside": -25.0}


def again(result, **changes):
    """Return the case with changes solved afresh on the mesh that the result's last round began with."""
    case = result.case
    for key, value in changes.items():
        case = read.replace(case, ("spaces", key, "temperature"), value)
    return solve_on(case, result.solution.steady.mesh)


@pytest.fixture(scope="session")
def seamless(texts):
    """The heated tee without its contact: a mesh that is open already can't be opened again."""
    text = (
        texts["heated"]
        .replace(texts["heated"].split("[[contact]]")[1].split("[[sheet]]")[0], "")
        .replace("[[contact]]", "")
    )
    return run(read.loads(text))


def test_field_and_flows_meet_a_fresh_run(seamless):
    moved, fresh = seamless.at(NEW), again(seamless, **NEW)
    scale = np.ptp(fresh.temperature)
    nodes = moved.solution.steady.temperature
    assert np.abs(nodes - fresh.temperature).max() < 1e-6 * scale
    assert np.abs(moved.temperature - seamless.temperature).max() > 0.1 * scale, "something did change"
    flows = moved.solution.steady.boundary_flow
    assert np.abs(flows - fresh.boundary_flow).max() < 1e-6 * fresh.throughput


def test_answers_meet_a_fresh_run_s(tee):
    """A run of its own makes its own mesh: the two agree within their intervals."""
    moved = tee.at(NEW).answers
    case = tee.case
    for name, value in NEW.items():
        case = read.replace(case, ("spaces", name, "temperature"), value)
    fresh = run(case).answers
    for name, flow in moved.spaces.items():
        other = fresh.spaces[name]
        assert flow.temperature == other.temperature
        assert flow.heat_flow_low <= other.heat_flow_high and other.heat_flow_low <= flow.heat_flow_high
        assert flow.heat_flow != tee.answers.spaces[name].heat_flow


def test_flows_follow_from_the_coupling_table(tee):
    """Q_A = sum over B of L_AB (T_A - T_B), to 1e-6."""
    moved = tee.at({**NEW, "right": "50 degF"}).answers
    temperature = {name: space.temperature for name, space in moved.spaces.items()}
    assert temperature["right"] == pytest.approx(10.0)
    for one, row in tee.answers.coupling.items():
        flow = sum(value * (temperature[one] - temperature[other]) for other, value in row.items())
        assert moved.spaces[one].heat_flow == pytest.approx(flow, rel=1e-6)


def test_probe_and_coldest_point_follow_from_the_weighting_factors(heated):
    weighting = heated.answers.weighting
    moved = heated.at(NEW)
    temperature = {name: space.temperature for name, space in moved.answers.spaces.items()}
    entry = weighting["probes"]["in the brick"]
    assert sum(entry["factors"].values()) == pytest.approx(1.0, abs=1e-9)
    assert entry["from_heat_sources"] > 1.0
    value = sum(g * temperature[name] for name, g in entry["factors"].items()) + entry["from_heat_sources"]
    assert moved.answers.probes["in the brick"].temperature == pytest.approx(value, abs=1e-6)
    for name, points in weighting["surfaces"].items():
        found = heated.answers.boundaries[name].temperature
        for which, temperature_there in (("coldest", found.min), ("warmest", found.max)):
            entry = points[which]
            own = {space: s.temperature for space, s in heated.answers.spaces.items()}
            value = sum(g * own[space] for space, g in entry["factors"].items()) + entry["from_heat_sources"]
            assert temperature_there == pytest.approx(value, abs=1e-6)


def test_moisture_follows(tee):
    before, after = tee.answers.surfaces["right"]["moisture"], tee.at(NEW).answers.surfaces["right"]["moisture"]
    assert after.surface_humidity > before.surface_humidity + 0.02


def test_unknown_space_is_named(tee):
    with pytest.raises(CaseError, match="no such space; the case has left, right, outside"):
        tee.at({"lefft": 20})


def test_nonsense_temperature_is_refused(tee):
    with pytest.raises(CaseError, match="temperature"):
        tee.at({"left": "warm"})


def test_touching_fixed_surfaces_stay_together():
    text = """
title = "two fixed faces that touch"
[model]
dimensions = 2
[spaces.a]
temperature = 5
surface_resistance = 0
[spaces.b]
temperature = 5
surface_resistance = 0
[spaces.c]
temperature = 20
film = 8
[materials.m]
conductivity = 1
[[body]]
name = "m"
material = "m"
box = { from = [0, 0], to = [100, 100] }
[[boundary]]
name = "below"
on = { plane = { y = 0 } }
space = "a"
[[boundary]]
name = "beside"
on = { plane = { x = 0 } }
space = "b"
[[boundary]]
name = "rest"
on = "rest"
space = "c"
"""
    result = run(read.loads(text))
    with pytest.raises(CaseError, match='"below", "beside" touch'):
        result.at({"a": 6})
    assert result.at({"a": 6, "b": 6}).answers.spaces["c"].heat_flow < result.answers.spaces["c"].heat_flow
