"""Where floating spaces settle: a plain wall between a room and a hall, computed by hand."""

from __future__ import annotations

import numpy as np
import pytest
from solution.grids import grid
from solution.test_spaces import text

from coldseam.case.read import loads
from coldseam.errors import SolveError
from coldseam.solution.heatsystem import heat_system
from coldseam.solution.starting import machine_outlook, starting_state
from coldseam.solution.steady import solve_on

MESH = grid(np.linspace(0, 0.1, 4), np.linspace(0, 1.0, 4))
WALL = 1.0 / (1 / 10 + 0.1 / 1e4 + 1 / 4)  # W/K: the films of the two sides and next to nothing between


def steady(floating: str, hall: float = 30.0):
    """Return the steady solution of the two-node case with its time taken out."""
    case = text(floating, hall=hall).replace("start = 20\nheat_capacity", "heat_capacity")
    head, _, rest = case.partition("[time]")
    return solve_on(loads(head + rest[rest.index("[spaces.room]") :]), MESH)


def test_a_space_with_a_gain_settles_above_what_is_outside():
    found = steady("gain = 70")
    assert found.case.spaces["room"].temperature == pytest.approx(30 + 70 / WALL)
    assert found.boundary_flow[:2] == pytest.approx([70, -70])
    assert found.remarks == ()


def test_a_machine_that_is_large_enough_holds_its_setpoint():
    found = steady("gain = 70\ncooling = { setpoint = 5, band = 2, capacity = 400 }")
    assert found.case.spaces["room"].temperature == pytest.approx(5.0)
    assert found.boundary_flow[1] == pytest.approx(25 * WALL)
    assert found.remarks == ()


def test_a_machine_that_is_too_small_is_said_to_with_its_balance_temperature():
    """0 = 70 - (20 + 2 T) + U (30 - T): the machine's curve and the wall meet."""
    found = steady("gain = 70\ncooling = { setpoint = -20, band = 2, capacity = [[-10, 0], [50, 120]] }")
    balance = (70 - 20 + 30 * WALL) / (2 + WALL)
    assert found.case.spaces["room"].temperature == pytest.approx(balance)
    assert f"settles at {balance:.1f} °C" in found.remarks[0] and "never hold -20 °C" in found.remarks[0]


def test_a_machine_in_the_cold_stands_still():
    found = steady("gain = 0\ncooling = { setpoint = 5, band = 2, capacity = 400 }", hall=-10)
    assert found.case.spaces["room"].temperature == pytest.approx(-10.0)


def test_a_run_starts_steady_and_tells_of_a_machine_too_small():
    case = text("gain = 70\ncooling = { setpoint = -20, band = 2, capacity = 100 }", hall=30)
    system = heat_system(loads(case.replace("start = 20\nrecord", 'start = "steady"\nrecord')), MESH)
    state = starting_state(system)
    assert state.y[0] == pytest.approx(30 + (70 - 100) / WALL)
    assert "settles at" in machine_outlook(system)[0]


def test_a_space_that_gains_heat_and_loses_it_to_nothing_has_no_balance():
    case = (
        text("gain = 70", hall=30)
        .replace('space = "hall"', "adiabatic = true")
        .replace("[spaces.hall]\ntemperature = 30\nfilm = 4\n", "")
    )
    system = heat_system(loads(case.replace("start = 20\nrecord", 'start = "steady"\nrecord')), MESH)
    with pytest.raises(SolveError):
        starting_state(system)
