"""Coefficients that follow the temperature over time."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import solve_ivp
from scipy.optimize import brentq
from solution.grids import first_state, grid, slab_text

from coldseam.case.read import loads
from coldseam.errors import CaseError
from coldseam.solution.heatsystem import heat_system
from coldseam.solution.refresh import refresher
from coldseam.solution.starting import starting_state
from coldseam.solution.transient import Transient

MESH = grid(np.linspace(0, 0.1, 11), np.array([0.0, 0.1]))


def prepared(text: str, mesh=MESH) -> Transient:
    system = heat_system(loads(text), mesh)
    refresh = refresher(system)
    return Transient(system, starting_state(system), refresh=refresh)


def run(text: str):
    made = prepared(text)
    while made.status == "running":
        made.step()
    return made.result()


def test_a_radiating_plate_cools_as_stefan_and_boltzmann_say():
    """A plate of one temperature in a cold enclosure: dT/dt = -eps sigma (T^4 - T0^4)/(rho c L)."""
    text = slab_text(
        k=400, rho=2000, c=1000, start=300, air=0, length=100, width=100, duration=36000, record=3600, tolerance=0.05
    )
    text = text.replace("film = 1\n", "film = 1e-6\nradiation = { emissivity = 0.8 }\n")
    history = run(text)
    exact = solve_ivp(
        lambda t, y: -0.8 * 5.670374419e-8 * (y**4 - 273.15**4) / (2000 * 1000 * 0.1),
        (0, 36000), [573.15], rtol=1e-9, t_eval=np.arange(0, 36001, 3600),
    )  # fmt: skip
    assert history.column("probe", "centre") == pytest.approx(exact.y[0] - 273.15, abs=0.5)
    assert history.relative_closure < 1e-9


def test_conductivity_over_temperature_reaches_the_kirchhoff_profile():
    """k = 0.022 (1 + 0.004 T) between 20 and -30 °C settles at the middle at -3.728 °C (Kirchhoff's transformation)."""
    text = slab_text(
        k=1,
        rho=35,
        c=1400,
        start=0,
        air=-30,
        film=1e5,
        length=100,
        width=100,
        duration=86400,
        record=8640,
        tolerance=0.02,
    )
    text = text.replace("conductivity = 1\n", "conductivity = { table = [[-100, 0.0132], [100, 0.0308]] }\n")
    text = text.replace(
        '[[boundary]]\nname = "rest"',
        '[[boundary]]\nname = "warm"\non = { plane = { x = 0 } }\ntemperature = 20\n[[boundary]]\nname = "rest"',
    )
    text = text.replace("at = [100, 50.0]", "at = [50, 50.0]")
    history = run(text)
    assert history.column("probe", "surface")[-1] == pytest.approx(-3.728, abs=0.03)
    assert -history.column("boundary", "face")[-1] / 0.1 == pytest.approx(10.78, rel=3e-3)
    assert history.relative_closure < 1e-9


def test_a_steady_start_has_the_coefficients_of_its_own_temperatures():
    """A source that only radiation carries off, 4e4 W/m³ over 0.1 m: eps sigma (T^4 - T0^4) = 4000 W/m²."""
    text = slab_text(
        k=400,
        rho=2000,
        c=1000,
        start='"steady"',
        air=0,
        length=100,
        width=100,
        duration=3600,
        record=1800,
        tolerance=0.05,
    )
    text = text.replace("film = 1\n", "film = 1e-6\nradiation = { emissivity = 0.8 }\n")
    text = text.replace('material = "stuff"\n', 'material = "stuff"\nheat_density = 4e4\n')
    history = run(text)
    surface = (4000 / (0.8 * 5.670374419e-8) + 273.15**4) ** 0.25 - 273.15
    assert history.column("probe", "surface") == pytest.approx([surface] * 3, abs=0.3)


def test_a_floating_space_with_laws_starts_steady():
    """20 W into a room behind 0.1 m² of a plate: the air is above 20 °C by what radiation, film and plate need, and it stays."""
    text = slab_text(
        k=10, rho=100, c=500, start='"steady"', length=100, width=100, duration=36000, record=18000, tolerance=0.02
    )
    text = text.replace(
        "temperature = 0\nfilm = 1",
        "film = 2\nradiation = { emissivity = 0.9 }\nfloating = { heat_capacity = 50, gain = 20 }",
    )
    far = '[[boundary]]\nname = "far"\non = { plane = { x = 0 } }\ntemperature = 20\n'
    history = run(text.replace('[[boundary]]\nname = "rest"', far + '[[boundary]]\nname = "rest"'))
    surface = 20 + 200 * 0.1 / 10
    air = brentq(
        lambda t: 2 * (t - surface) + 0.9 * 5.670374419e-8 * ((t + 273.15) ** 4 - (surface + 273.15) ** 4) - 200, 0, 99
    )
    # Coefficients stay while they have moved by less than 2e-3 of themselves: 0.05 K of these 27 K.
    assert history.column("space", "air") == pytest.approx([air] * 3, abs=0.05)


def test_a_floating_space_whose_surfaces_see_something_else_is_refused():
    text = slab_text().replace(
        "temperature = 0\nfilm = 1",
        "film = 1\nradiation = { emissivity = 0.9, surroundings = 5 }\nfloating = { start = 1, heat_capacity = 1 }",
    )
    text = text.replace(
        '[[boundary]]\nname = "rest"',
        '[[boundary]]\nname = "far"\non = { plane = { x = 0 } }\ntemperature = 1\n[[boundary]]\nname = "rest"',
    )
    made = prepared(text, grid(np.linspace(0, 1, 5), np.array([0.0, 0.1])))
    with pytest.raises(CaseError, match="its air only"):
        made.step()


def test_nothing_follows_where_no_law_is():
    system = heat_system(loads(slab_text()), grid(np.linspace(0, 1, 5), np.array([0.0, 0.1])))
    assert refresher(system) is None and first_state(system).time == 0.0
