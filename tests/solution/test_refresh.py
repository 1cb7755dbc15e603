"""Coefficients that depend on the temperatures, over time: against an ordinary differential equation, and the steady run."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from coldseam.case import read
from coldseam.study import run

PLATE = """
title = "plate that cools"
[model]
dimensions = 2
accuracy = "1 %"
[time]
duration = "2 h"
start = 200
[spaces.room]
temperature = 20
FILM
[materials.copper]
conductivity = 400
density = 8900
specific_heat = 390
[[body]]
name = "plate"
material = "copper"
SOURCE
box = { from = [0, 0], to = [5, 100] }
[[boundary]]
name = "face"
on = { plane = { x = 5 } }
space = "room"
[[boundary]]
name = "rest"
on = "rest"
adiabatic = true
"""
SIGMA = 5.670374419e-8
CAPACITY = 8900 * 390 * 0.005  # J/(m² K)


def cooling(film: str, source: str = "") -> object:
    return run(read.loads(PLATE.replace("FILM", film).replace("SOURCE", source)))


def test_a_plate_cools_by_radiation():
    """One lump of copper (Biot number 1e-4) by Stefan and Boltzmann's law, integrated by scipy to 1e-9."""
    found = cooling("radiation = { emissivity = 0.8 }").history

    def slope(_, t):
        return -0.8 * SIGMA * ((t + 273.15) ** 4 - 293.15**4) / CAPACITY

    exact = solve_ivp(slope, (0, 7200), [200.0], rtol=1e-9, atol=1e-9, t_eval=found.column("time"))
    error = np.abs(found.column("mean", "face") - exact.y[0]).max()
    assert error < 0.002 * 180  # steps follow the coefficients to 0.2 %
    assert exact.y[0, -1] < 120  # it has cooled by half, so a frozen coefficient would show


def test_frozen_coefficients_would_show():
    """The same with the film of the beginning for good: far off, so the test above can fail."""
    h = 0.8 * SIGMA * (473.15**2 + 293.15**2) * (473.15 + 293.15)
    frozen = 20 + 180 * np.exp(-h * 7200 / CAPACITY)
    moving = cooling("radiation = { emissivity = 0.8 }").history.column("mean", "face")[-1]
    assert abs(frozen - moving) > 5


def test_it_ends_where_the_steady_run_is():
    film = 'convection = { kind = "free", surface = "vertical", length = 100 }\nradiation = { emissivity = 0.9 }'
    text = PLATE.replace("2 h", "6 h").replace("FILM", film).replace("SOURCE", "heat_source = 20")
    late = run(read.loads(text)).history.column("mean", "face")[-1]
    steady = text[: text.index("[time]")] + text[text.index("[spaces.room]") :]
    surface = run(read.loads(steady)).answers.boundaries["face"].temperature.mean
    assert late == pytest.approx(surface, abs=0.2)
    assert surface > 30
