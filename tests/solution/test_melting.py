"""Freezing by heat content: Neumann's exact solution in 1D, 2D and 3D meshes, latent heat never lost."""

from __future__ import annotations

import numpy as np
import pytest
from solution.grids import grid, stepping

from coldseam.case.read import loads
from coldseam.physics.melting import heat_content
from coldseam.solution.fronts import Fronts
from coldseam.solution.heatsystem import heat_system
from coldseam.solution.transient import Transient

# Water at 0 °C, its face held at -10 °C; ice k 2.22, c 2050; rho 1000, L 333.6 kJ/kg. Neumann's solution (Carslaw, Jaeger
# 1959, 11.2): front 21.670 mm and 1034.7 W/m² after 1 h.
FRONT, FLUX = 21.670e-3, 1034.7
WATER = """
title = "freezing water"
[model]
dimensions = {dim}
[time]
duration = "1 h"
start = 0.05
record_every = "10 min"
tolerance = 0.1
[materials.stuff]
conductivity = 2.22
density = 1000
specific_heat = 2050
melting = {{ at = 0, latent_heat = "333.6 kJ/kg" }}
[[body]]
name = "slab"
material = "stuff"
box = {{ from = {zero}, to = {size} }}
[[boundary]]
name = "cold"
on = {{ plane = {{ x = 0 }} }}
temperature = -10
[[boundary]]
name = "rest"
on = "rest"
adiabatic = true
"""


def frozen(mesh, dim: int, size):
    return _run(mesh, WATER.format(dim=dim, zero=[0] * dim, size=size))


@pytest.mark.parametrize(
    ("axes", "size"),
    [
        ((np.linspace(0, 0.03, 41), np.array([0.0, 0.005])), [30, 5]),
        ((np.linspace(0, 0.03, 31), np.linspace(0, 0.003, 4)), [30, 3]),
        ((np.linspace(0, 0.03, 31), np.array([0.0, 0.001]), np.array([0.0, 0.001])), [30, 1, 1]),
    ],
    ids=["1D", "2D", "3D"],
)
def test_neumann_front_and_flux_within_one_percent(axes, size):
    mesh = grid(*axes)
    history, phase = frozen(mesh, len(size), size)
    area = np.prod([axis[-1] for axis in axes[1:]])
    front = 0.03 * (1.0 - float(phase.melted(history.final.temperature)[0]))
    assert front == pytest.approx(FRONT, rel=0.01)
    (read,) = Fronts(history.system.mesh, phase).at(history.final.temperature)
    assert read.mean[0] == pytest.approx(FRONT, rel=0.01)
    assert read.area == pytest.approx(area, rel=0.02)  # level but for the diagonals of cells
    assert history.column("front_from_x", "slab")[-1] == pytest.approx(1000 * read.low[0])
    assert history.column("front_to_x", "slab")[-1] == pytest.approx(1000 * FRONT, rel=0.02)
    # The flux falls as 1/sqrt(t), so the heat given off is 2 q t.
    time, melted = history.column("time"), 1.0 - history.column("melted", "slab")
    half = int(np.argmin(np.abs(time - 1800)))
    assert melted[half] * 0.03 == pytest.approx(FRONT / np.sqrt(2), rel=0.01)
    heat = -history.totals.heat[0] / area
    assert heat == pytest.approx(2 * FLUX * 3600, rel=0.01)
    assert history.relative_closure < 1e-9


def test_latent_heat_is_not_jumped_over():
    """A lumped body with latent heat under a constant flow: its plateau lasts L m / q, whatever the step."""
    mesh = grid(np.linspace(0, 0.01, 3), np.array([0.0, 0.01]))
    text = WATER.format(dim=2, zero=[0, 0], size=[10, 10]).replace("temperature = -10", "heat_flux = -1000")
    text = text.replace("conductivity = 2.22", "conductivity = 1000").replace("start = 0.05", "start = 1")
    # No space or temperature would leave the steady problem open; a film of next to nothing closes it.
    text = text.replace("adiabatic = true", 'space = "air"') + "[spaces.air]\ntemperature = 1\nfilm = 1e-9\n"
    history, phase = _run(mesh, text)
    given = 1000.0 * 3600 / 0.01  # J/m³ taken out in an hour
    frozen_part = (given - 1000 * 2050 * 1.0) / (1000 * 333.6e3)
    assert 1 - phase.melted(history.final.temperature)[0] == pytest.approx(min(frozen_part, 1.0), abs=2e-4)
    assert history.relative_closure < 1e-9


def _run(mesh, text):
    system = heat_system(loads(text), mesh)
    phase = heat_content(system.case, system.mesh)
    run = Transient(system, stepping(mesh, text).initial, phase=phase)
    while run.status == "running":
        run.step()
    return run.result(), phase


def test_heat_content_inverts_itself():
    mesh = grid(
        np.linspace(0, 0.02, 9),
        np.array([0.0, 0.01]),
        bodies=("a", "b"),
        material=("stuff", "wax"),
        body_of=lambda c: (c[:, 0] > 0.01).astype(int),
    )
    text = WATER.format(dim=2, zero=[0, 0], size=[20, 10])
    text += "[materials.wax]\nconductivity = 0.2\ndensity = 800\nspecific_heat = 2000\nmelting = { between = [-4, 3], latent_heat = 2e5, specific_heat_liquid = 2500 }\n"
    text = text.replace('name = "slab"', 'name = "a"').replace(
        "[[boundary]]",
        '[[body]]\nname = "b"\nmaterial = "wax"\nbox = { from = [10, 0], to = [20, 10] }\n[[boundary]]',
        1,
    )
    case = loads(text)
    phase = heat_content(case, mesh)
    for value in (-30.0, -4.0, -1.0, 0.0, 0.01, 2.9, 3.0, 40.0):
        temperature = np.full(mesh.n_nodes, value)
        assert phase.temperature(phase.heat(temperature), np.zeros_like(temperature)) == pytest.approx(
            temperature, abs=1e-9
        )
