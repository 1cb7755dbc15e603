"""Floating spaces over time: machines, air exchange, goods and events, against hand-computed small systems."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.linalg import expm
from scipy.optimize import brentq
from solution.grids import grid, run_on, stepping

from coldseam.answers.history import timed_answers
from coldseam.report.timed import event_lines

# A body that conducts so well that it has one temperature (Bi < 1e-4): with the room's air a system of two nodes.
ROOM = """
title = "two nodes"
[model]
dimensions = 2
[time]
duration = "{hours} h"
start = 20
record_every = "2 min"
tolerance = {tolerance}
[spaces.room]
film = 10
[spaces.room.floating]
start = 20
heat_capacity = 5000
{floating}
[spaces.hall]
temperature = {hall}
film = 4
{more}
[materials.stuff]
conductivity = 1e4
density = 1000
specific_heat = 500
[[body]]
name = "slab"
material = "stuff"
box = {{ from = [0, 0], to = [100, 1000] }}
[[boundary]]
name = "in"
on = {{ plane = {{ x = 0 }} }}
space = "room"
[[boundary]]
name = "out"
on = {{ plane = {{ x = 100 }} }}
space = "hall"
[[boundary]]
name = "ends"
on = "rest"
adiabatic = true
{end}
"""
BODY, AIR, INSIDE, OUTSIDE = 1000 * 500 * 0.1, 5000.0, 10.0, 4.0  # J/K, J/K, W/K, W/K
MESH = grid(np.linspace(0, 0.1, 4), np.linspace(0, 1.0, 4))
MATRIX = np.array([[-INSIDE / AIR, INSIDE / AIR], [INSIDE / BODY, -(INSIDE + OUTSIDE) / BODY]])  # room air, body


def text(floating="", more="", end="", *, hours=4, hall=20, tolerance=1e-3):
    return ROOM.format(floating=floating, more=more, end=end, hours=hours, hall=hall, tolerance=tolerance)


def moved(state, heat, seconds, hall=20.0):
    """Return room and body after so long with a constant heat into the room, exactly."""
    drive = np.array([heat / AIR, OUTSIDE * hall / BODY])
    rest = np.linalg.solve(MATRIX, -drive)
    return rest + expm(MATRIX * seconds) @ (state - rest)


def test_thermostat_against_a_hand_computed_two_node_system():
    """400 W on-off round 5 °C with a band of 2 K: every switch of an hour within 2 s."""
    machine = "cooling = { setpoint = 5, band = 2, capacity = 400, power = 150 }"
    run = stepping(MESH, text(machine, hours=1, tolerance=3e-4))
    switches = []
    while run.status == "running":
        before = run.state.running.copy()
        run.step()
        if np.any(run.state.running != before):
            switches.append(run.time)
    state, clock, on, expected = np.array([20.0, 20.0]), 0.0, True, []
    while True:
        level, heat = (4.0, -400.0) if on else (6.0, 0.0)
        gap = lambda s, state=state, heat=heat, level=level: moved(state, heat, s)[0] - level  # noqa: E731
        high = 1.0
        while gap(high) * gap(1e-6) > 0 and high < 1e5:
            high *= 1.5
        wait = brentq(gap, 1e-6, high)
        if clock + wait > 3600:
            break
        state, clock, on = moved(state, heat, wait), clock + wait, not on
        expected.append(clock)
    assert len(switches) == len(expected) > 8
    assert switches == pytest.approx(expected, abs=2.0)
    history = run.result()
    assert history.relative_closure < 1e-10
    final = moved(state, -400.0 if on else 0.0, 3600 - clock)
    assert history.final.temperature.mean() == pytest.approx(final[1], abs=2e-3)
    assert history.final.y[0] == pytest.approx(final[0], abs=0.05)  # the air moves 0.07 K in a second
    edges = np.array([0.0, *expected, 3600])
    running = np.diff(edges)[::2].sum()
    share = dict(
        zip([(c.kind, c.name) for c in history.columns[-len(history.totals.heat) :]], history.totals.heat, strict=True)
    )
    assert share["share", "room"] == pytest.approx(running, abs=5.0)
    assert share["power", "room"] == pytest.approx(150.0 * running, rel=1e-3)


def test_two_spaces_exchange_against_the_matrix_exponential():
    """Two floating rooms share air; the second meets the body's other side: three nodes, 2 mK after 3 h."""
    more = '[spaces.store]\nfilm = 4\n[spaces.store.floating]\nstart = -10\nheat_capacity = 20000\nair_exchange = { with = "room", flow = "30 m3/h" }'
    case = text(more=more, hours=3, tolerance=2e-4).replace(
        'on = { plane = { x = 100 } }\nspace = "hall"', 'on = { plane = { x = 100 } }\nspace = "store"'
    )
    case = case.replace("[spaces.hall]\ntemperature = 20\nfilm = 4\n", "")
    case += '[[boundary]]\nname = "top"\non = { plane = { y = 1000 } }\ntemperature = 20\n'
    case = case.replace(
        '"top"\non = { plane = { y = 1000 } }\ntemperature = 20',
        '"top"\non = { plane = { y = 1000 } }\nheat_flow = 1e-9',
    )
    history = run_on(MESH, case)
    g = 30 / 3600 * 1.2 * 1006.0
    matrix = np.array(
        [
            [-(INSIDE + g) / AIR, INSIDE / AIR, g / AIR],
            [INSIDE / BODY, -(INSIDE + OUTSIDE) / BODY, OUTSIDE / BODY],
            [g / 20000, OUTSIDE / 20000, -(OUTSIDE + g) / 20000],
        ]
    )
    exact = expm(matrix * 3 * 3600) @ np.array([20.0, 20.0, -10.0])
    found = [history.final.y[0], history.final.temperature.mean(), history.final.y[1]]
    assert found == pytest.approx(exact, abs=2e-3)
    assert abs(history.heat_stored) < 1e-3  # J, of the 1e-9 W given: nothing enters


def test_goods_are_nodes_of_their_own():
    """Goods of 20 kg at 40 °C in the room: three nodes against the matrix exponential."""
    goods = 'goods = [{ name = "crates", mass = 20, specific_heat = 3500, area = 2, film = 6, start = 40 }]'
    history = run_on(MESH, text(goods, hours=6, tolerance=2e-4))
    c, g = 20 * 3500.0, 12.0
    matrix = np.array(
        [
            [-(INSIDE + g) / AIR, INSIDE / AIR, g / AIR],
            [INSIDE / BODY, -(INSIDE + OUTSIDE) / BODY, 0.0],
            [g / c, 0.0, -g / c],
        ]
    )
    exact = 20.0 + expm(matrix * 6 * 3600) @ np.array([0.0, 0.0, 20.0])
    assert [history.final.y[0], history.final.temperature.mean(), history.final.y[1]] == pytest.approx(exact, abs=2e-3)
    assert history.column("goods", "room/crates")[0] == 40.0
    assert history.relative_closure < 1e-10


def test_an_event_is_located_to_the_second_and_reported_with_its_error():
    end = '[[event]]\nname = "warm"\nwhen = { space = "room", rises_above = 22 }\n[[event]]\nname = "hot"\nwhen = { space = "room", rises_above = 90 }'
    history = run_on(MESH, text("gain = 100", end=end, tolerance=1e-4))
    exact = brentq(lambda s: moved(np.array([20.0, 20.0]), 100.0, s)[0] - 22.0, 1.0, 1e4)
    warm, hot = history.events
    assert warm.time == pytest.approx(exact, abs=1.0)
    assert 0 < warm.error < 10.0
    assert hot.time is None and hot.closest == pytest.approx(history.final.y[0], abs=1e-6)
    answers = timed_answers(history, {}, {"over_time": {"share": 0.01}}, (), {}).as_dict()
    assert answers["history"]["events"]["warm"]["error"] == pytest.approx(warm.error + 0.01 * warm.time)
    first, second = event_lines(answers)
    assert first.startswith("warm: after ") and " ± " in first
    assert second == f"hot: not reached; closest {hot.closest:.1f} °C after 4 h (space room rises above 90 °C)"
    assert [w for w in answers["warnings"] if 'event "hot" did not happen within 14400 s' in w and "closest" in w]


def test_a_run_ends_at_an_event_that_stops_it():
    end = '[[event]]\nname = "warm"\nwhen = { space = "room", rises_above = 22 }\nstop = true'
    history = run_on(MESH, text("gain = 100", end=end, tolerance=1e-4))
    assert history.final.time == pytest.approx(history.events[0].time)
    assert history.final.y[0] == pytest.approx(22.0, abs=1e-3)
    assert history.rows[-1, 0] == pytest.approx(history.final.time)
    assert history.relative_closure < 1e-10


def test_a_gain_that_jumps_is_a_step_end_and_counts_exactly():
    """A door's heat of 500 W from 1 h to 1 h 10 min: its integral is exact, not smeared over steps."""
    gain = 'gain = { table = [["0 h", 0], ["1 h", 0], ["1 h", 500], ["70 min", 500], ["70 min", 0], ["4 h", 0]] }'
    history = run_on(MESH, text(gain))
    heat = dict(
        zip([(c.kind, c.name) for c in history.columns[-len(history.totals.heat) :]], history.totals.heat, strict=True)
    )
    assert heat["gain", "room"] == pytest.approx(500 * 600.0, rel=1e-12)
    state = moved(moved(np.array([20.0, 20.0]), 500.0, 600.0), 0.0, 4 * 3600 - 4200)
    assert history.final.y[0] == pytest.approx(state[0], abs=5e-3)


def test_a_machine_pauses_to_defrost():
    """Modulating machine that could hold the room; 20 min of pause every hour with 100 W of heater."""
    machine = 'cooling = { setpoint = 5, band = 2, capacity = 400, control = "modulating", defrost = { every = "1 h", lasts = "20 min", heat = 100 } }'
    history = run_on(MESH, text(machine))
    time, cooling = history.column("time"), history.column("cooling", "room")
    paused = (time > 3600) & (time % 3600 > 10) & (time % 3600 < 1190)
    assert paused.any() and np.all(cooling[paused] == 0.0)
    assert history.column("gain", "room")[paused] == pytest.approx(100.0)
    assert np.all(cooling[(time > 3600) & (time % 3600 > 1210)] < 0.0)


def test_stages_switch_one_after_the_other():
    machine = 'cooling = { setpoint = 10, band = 4, capacity = 600, control = "staged", stages = 3 }'
    run = stepping(MESH, text(machine))
    assert run.state.running.tolist() == [3]
    seen = []
    while run.status == "running":
        run.step()
        seen.append(int(run.state.running[0]))
    changes = np.diff(np.array(seen))
    assert set(np.unique(changes)) <= {-1, 0, 1} and set(seen) >= {1, 2}
    assert run.result().relative_closure < 1e-10


def test_moist_air_brings_latent_heat():
    """60 % air of 20 °C into a room of 5 °C and 80 %: mass flow times the difference of humidity ratios times 2.5 MJ/kg."""
    floating = 'air_exchange = { with = "hall", flow = "10 m3/h" }'
    case = (
        text(floating)
        .replace("film = 10\n", 'film = 10\nrelative_humidity = "80 %"\n')
        .replace("film = 4\n", 'film = 4\nrelative_humidity = "60 %"\n')
    )
    case = case.replace("start = 20\nheat", "start = 5\nheat")
    history = run_on(MESH, case)
    vapour = np.array(
        [0.6 * 2339.0, 0.8 * 872.6]
    )  # Pa over water at 20 and 5 °C, ASHRAE Fundamentals ch. 1 (from memory)
    ratio = 0.622 * vapour / (101325.0 - vapour)
    latent = history.column("latent", "room")[0]
    assert latent == pytest.approx(10 / 3600 * 1.2 * (ratio[0] - ratio[1]) * 2.501e6, rel=5e-3)
    assert history.relative_closure < 1e-10


def test_ambient_and_availability_scale_a_machine():
    more = 'cooling = { setpoint = 5, band = 2, capacity = 400, ambient = "hall", ambient_at = 30, ambient_factor = "-2 %", available = { table = [["0 h", 1], ["1 h", 1], ["1 h", 0], ["4 h", 0]] } }'
    history = run_on(MESH, text(more, hall=40))
    cooling = history.column("cooling", "room")
    assert cooling[0] == pytest.approx(-400 * 0.8)
    assert np.all(cooling[history.column("time") > 3601] == 0.0)
