"""Where fronts of melting are read to be, on fields whose front is known."""

from __future__ import annotations

import numpy as np
import pytest
from solution.grids import grid
from solution.test_melting import WATER

from coldseam.case.read import loads
from coldseam.physics.melting import heat_content
from coldseam.solution.fronts import Fronts


def fronts(mesh):
    case = loads(
        WATER.format(dim=mesh.dim, zero=[0] * mesh.dim, size=[30] * mesh.dim).replace("at = 0", "between = [-1, 1]")
    )
    return Fronts(mesh, heat_content(case, mesh))


def test_a_slanted_plane_in_a_solid():
    """x + y + z = 1.5 cuts a cube in a regular hexagon of side sqrt(1/2): area 3 sqrt(3)/4."""
    mesh = grid(*(np.linspace(0, 1, 6),) * 3)
    (front,) = fronts(mesh).at(mesh.points.sum(axis=1) - 1.5)  # within the melting range but for the corners
    assert front.area == pytest.approx(0.75 * np.sqrt(3), rel=1e-9)
    assert front.mean == pytest.approx(np.full(3, 0.5)) and front.low == pytest.approx(np.zeros(3), abs=1e-12)
    assert front.high == pytest.approx(np.ones(3))


def test_a_circle_in_a_section_and_a_sphere_of_revolution():
    axis = np.linspace(0, 1, 81)
    for turned, area, mean in ((False, 0.3 * np.pi, 1.2 / np.pi), (True, 2 * np.pi * 0.36, 0.6 * np.pi / 4)):
        mesh = grid(axis, axis, axisymmetric=turned)
        (front,) = fronts(mesh).at(np.hypot(*mesh.points.T) - 0.6)
        assert front.area == pytest.approx(area, rel=1e-3)
        assert front.mean[0] == pytest.approx(mean, rel=1e-3)
        assert front.high == pytest.approx([0.6, 0.6], abs=1e-3) and front.low == pytest.approx([0, 0], abs=1e-12)


def test_extents_say_the_same_and_nothing_where_all_is_frozen_or_melted():
    mesh = grid(np.linspace(0, 1, 9), np.linspace(0, 1, 5))
    read = fronts(mesh)
    ((low, high),) = read.extents(mesh.points[:, 0] - 0.3)
    assert low == pytest.approx([0.3, 0]) and high == pytest.approx([0.3, 1])
    for level in (-9.0, 9.0):
        assert read.at(np.full(mesh.n_nodes, level)) == [None]
        assert np.isnan(read.extents(np.full(mesh.n_nodes, level))).all()


def test_only_cells_of_the_body_count():
    mesh = grid(
        np.linspace(0, 1, 9), np.linspace(0, 1, 5), bodies=("ice", "slab"), material=("dry", "stuff"),
        body_of=lambda c: (c[:, 1] > 0.5).astype(int),
    )  # fmt: skip
    text = (
        WATER.format(dim=2, zero=[0, 500], size=[1000, 1000])
        + "[materials.dry]\nconductivity = 1\ndensity = 1\nspecific_heat = 1\n"
    )
    text = text.replace(
        "[[boundary]]",
        '[[body]]\nname = "ice"\nmaterial = "dry"\nbox = { from = [0, 0], to = [1000, 500] }\n[[boundary]]',
        1,
    )
    (front,) = Fronts(mesh, heat_content(loads(text), mesh)).at(mesh.points[:, 0] - 0.5)
    assert front.area == pytest.approx(0.5) and front.low[1] == pytest.approx(0.5)
