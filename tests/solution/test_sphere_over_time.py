"""A sphere cooling down on unstructured meshes, half a section and an octant: exact series, and no temperature out of range."""

from __future__ import annotations

from functools import cache

import numpy as np
import pytest
from published import exact_over_time as exact
from published import runs
from solution.grids import first_state

from coldseam.case.read import replace
from coldseam.geometry.mesher import open_geometry
from coldseam.solution.heatsystem import heat_system
from coldseam.solution.transient import Transient

SHAPES = {"sphere-axisymmetric": ("2.5 mm", 5e-3), "sphere-3d": ("6 mm", 1e-2)}
"""Largest element, and what may be off, of the difference at the start: the meshes' error, falling as h²."""


def case_of(stem: str, biot: float, fourier: float, **more):
    """Return the published case with another film and duration; Bi = h/10 and Fo = t/10000 s."""
    case = runs.case_of(runs.HERE / f"{stem}-over-time.toml")
    changes = {"spaces.air.film": 10 * biot, "time.duration": 1e4 * fourier, "time.record_every": 1e4 * fourier / 4}
    for key, value in (changes | {"model.size": SHAPES[stem][0]} | more).items():
        case = replace(case, key, value)
    return case


@cache
def mesh_of(stem: str, size: str):
    with open_geometry(case_of(stem, 1.0, 1.0, **{"model.size": size})) as mesher:
        return mesher.mesh(None, None)


def run_of(case, mesh, **options) -> Transient:
    system = heat_system(case, mesh)
    return Transient(system, first_state(system), **options)


@pytest.mark.parametrize("stem", SHAPES)
@pytest.mark.parametrize(("biot", "fourier"), [(0.1, 1.0), (1.0, 1.0), (10.0, 0.2)])
def test_series(stem, biot, fourier):
    """Carslaw, Jaeger 1959, 9.4: centre, surface, mean of the surface, heat given off."""
    size, close = SHAPES[stem]
    run = run_of(case_of(stem, biot, fourier), mesh_of(stem, size))
    while run.status == "running":
        run.step()
    history = run.result()
    centre, surface = (100 * exact.sphere(biot, fourier, place) for place in (0.0, 1.0))
    assert history.column("probe", "centre")[-1] == pytest.approx(centre, abs=100 * close)
    assert history.column("probe", "surface")[-1] == pytest.approx(surface, abs=100 * close)
    assert history.column("mean", "surface")[-1] == pytest.approx(surface, abs=100 * close)
    whole = 100 * history.system.capacity.sum()
    assert -history.heat_in / whole == pytest.approx(exact.given_off(exact.sphere, biot, fourier), abs=close)
    assert history.relative_closure < 1e-12


@pytest.mark.parametrize("stem", SHAPES)
@pytest.mark.parametrize("size", ["6 mm", "25 mm"])
def test_a_step_change_leaves_no_temperature_out_of_range(stem, size):
    """100 °C inside, 0 °C outside at once (Bi 1000), fine and coarse: what is read never leaves the range.

    Tetrahedra with obtuse edges lift nodes by up to 1.7 % of the difference; triangles keep to the range by themselves.
    """
    case = case_of(stem, 1000.0, 0.2, **{"time.tolerance": 0.1, "time.fields_every": 50})
    fields = []
    run = run_of(case, mesh_of(stem, size), on_field=lambda time, temperature: fields.append(temperature))
    low, high = np.inf, -np.inf
    while run.status == "running":
        run.step()
        low, high = min(low, run.state.temperature.min()), max(high, run.state.temperature.max())
    allowed = 2.0 if stem == "sphere-3d" else 0.1
    assert low >= -allowed and high <= 100.0 + allowed
    history = run.result()
    for name in ("surface", "cut y"):
        assert history.column("min", name).min() >= 0.0 and history.column("max", name).max() <= 100.0
    assert history.temperature.min() >= 0.0
    assert len(fields) == 40 and min(f.min() for f in fields) >= 0.0 and max(f.max() for f in fields) <= 100.0
    assert history.relative_closure < 1e-12
