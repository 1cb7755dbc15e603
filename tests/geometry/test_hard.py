"""Cases that must mesh without tuning, and size fields."""

from __future__ import annotations

import numpy as np
import pytest
from geometry_cases import body, make_case, mesh_of

from coldseam.geometry.mesher import FLATTEST, open_geometry
from coldseam.geometry.quality import shape_of
from coldseam.geometry.slivers import without_flat
from coldseam.mesh.build import signed_measure
from coldseam.mesh.types import SizeField

SKINS = body("skins", "c", "box = { from = [0, 0, -0.5], to = [300, 300, 100.5] }") + body(
    "foam", "a", "box = { from = [0, 0, 0], to = [300, 300, 100] }"
)
BOLT = body("bolt", "b", "cylinder = { from = [150, 150, -0.5], to = [150, 150, 100.5], diameter = 8 }")


def sound(mesh, most_cells: int):
    """Cells in every body, none flat, not too many for a first round."""
    assert np.bincount(mesh.cell_body, minlength=len(mesh.bodies)).min() > 0
    assert mesh.n_cells <= most_cells
    if mesh.dim == 3:
        assert mesh.quality["worst_radius_ratio"] >= FLATTEST


def test_steel_skins_on_foam():
    mesh = mesh_of(SKINS)
    sound(mesh, 30_000)
    assert mesh.quality["mesh_volume"]["skins"] == pytest.approx(2 * 0.5 * 300 * 300e-9)


def test_steel_skins_with_bolt():
    sound(mesh_of(SKINS + BOLT), 50_000)


def test_gap_of_half_a_millimetre():
    gap = body("gap", None, "box = { from = [49.75, 0, 10], to = [50.25, 100, 100] }")
    mesh = mesh_of(body("block", "a", "box = { from = [0, 0, 0], to = [100, 100, 100] }") + gap)
    sound(mesh, 50_000)
    assert mesh.quality["mesh_volume"]["block"] == pytest.approx(1e-3 - 0.5 * 100 * 90e-9)


def test_wide_corner_with_skins_in_section():
    mesh = mesh_of(
        body("outer", "c", "box = { from = [0, 0], to = [12000, 12000] }")
        + body("foam", "a", "box = { from = [0.5, 0.5], to = [12000, 12000] }")
        + body("inner", "c", "box = { from = [100.5, 100.5], to = [12000, 12000] }")
        + body("room", None, "box = { from = [101, 101], to = [12000, 12000] }"),
        dim=2,
    )
    sound(mesh, 20_000)
    assert mesh.quality["mesh_volume"]["outer"] == pytest.approx((12.0**2 - 11.9995**2), rel=1e-9)


@pytest.mark.slow
def test_hundred_bolts():
    mesh = mesh_of(
        body("panel", "a", "box = { from = [0, 0, 0], to = [3000, 3000, 100] }")
        + body(
            "bolts",
            "b",
            "cylinder = { from = [150, 150, 0], to = [150, 150, 100], diameter = 8 }",
            "repeat = { step = [[300, 0, 0], [0, 300, 0]], count = [10, 10] }",
        )
    )
    sound(mesh, 500_000)


def test_same_case_same_mesh(panel):
    one, two = mesh_of(panel), mesh_of(panel)
    assert np.array_equal(one.points, two.points) and np.array_equal(one.cells, two.cells)


def test_size_field_is_followed(panel):
    """Edges near the wanted place are about as long as asked, and the cells about as many."""
    with open_geometry(make_case(panel)) as mesher:
        first = mesher.mesh()
        place = np.array([0.05, 0.05, 0.1])
        size = np.minimum(0.03, 0.002 + 0.3 * np.linalg.norm(first.points - place, axis=1))
        mesh = mesher.mesh(SizeField(mesh=first, size=size))
        again = mesher.mesh(SizeField(mesh=first, size=size), target_cells=3 * mesh.n_cells)
    centre = mesh.points[mesh.cells].mean(axis=1)
    edge = np.linalg.norm(mesh.points[mesh.cells[:, 0]] - mesh.points[mesh.cells[:, 1]], axis=1)
    near = np.linalg.norm(centre - place, axis=1) < 0.02
    far = np.abs(centre - [0.25, 0.25, 0.05]).max(axis=1) < 0.03
    # the field lives on the coarse first mesh, whose nodes near the place lie some 20 mm off
    assert np.median(edge[near]) < 0.4 * np.median(edge[far])
    assert again.quality["scale"] < 1.0
    assert 1.6 * mesh.n_cells < again.n_cells < 4.8 * mesh.n_cells


def test_size_field_in_section():
    with open_geometry(make_case(body("it", "a", "box = { from = [0, 0], to = [100, 100] }"), dim=2)) as mesher:
        first = mesher.mesh()
        mesh = mesher.mesh(SizeField(mesh=first, size=np.full(first.n_nodes, 0.002)))
    edge = np.linalg.norm(np.diff(mesh.points[mesh.facets], axis=1)[:, 0], axis=1)
    assert edge == pytest.approx(0.002, rel=0.05)


def test_case_size_caps():
    mesh = mesh_of(body("it", "a", "box = { from = [0, 0], to = [100, 100] }"), dim=2, model="size = 4")
    edge = np.linalg.norm(np.diff(mesh.points[mesh.facets], axis=1)[:, 0], axis=1)
    assert edge.max() <= 0.004 * 1.01


def test_patches_are_whole_faces(panel):
    """Exterior faces: the panel's six, and the bolt's two ends."""
    mesh = mesh_of(panel)
    assert len(np.unique(mesh.facet_patch)) == 8
    for patch in np.unique(mesh.facet_patch):
        points = mesh.points[mesh.facets[mesh.facet_patch == patch]].reshape(-1, 3)
        assert np.ptp(points, axis=0).min() == pytest.approx(0.0, abs=1e-12)


def test_flat_cell_is_taken_out():
    """Four nodes in one plane between two others: the crossing edges are joined, no volume lost."""
    points = np.array([[1.5, 0, 0], [-1, 0, 0], [0, 1, 0], [0, -2, 0], [0, 0, 1], [0, 0, -1.0]])
    cells = np.array([[0, 1, 2, 3], [0, 1, 2, 4], [0, 1, 3, 4], [0, 2, 3, 5], [1, 2, 3, 5]])
    raw = {
        "points": points,
        "cells": cells,
        "cell_body": np.array([0, 0, 0, 1, 1]),
        "facets": np.array([[0, 2, 4], [0, 1, 2]]),
        "patch_of": np.array([0, 1]),
    }
    volume = np.abs(signed_measure(points, cells)).sum()
    mended, removed = without_flat(raw, FLATTEST)
    assert removed == 1
    assert shape_of(mended["points"], mended["cells"]).min() > 0.1
    assert np.abs(signed_measure(mended["points"], mended["cells"])).sum() == pytest.approx(volume)
    assert len(mended["cells"]) == 8 and len(mended["facets"]) == 3
