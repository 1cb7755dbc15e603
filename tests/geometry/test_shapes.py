"""Every kind of body against its exact measure; tolerances are those of a polygon in a circle.

A circle of n segments loses the share 1 - sin(x)/x of its area, x = 2 pi/n (elementary geometry).
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from geometry_cases import body, make_case, mesh_of

from coldseam.errors import CaseError
from coldseam.geometry.mesher import open_geometry
from coldseam.mesh.build import signed_measure

LOST = 1.0 - math.sin(2 * math.pi / 24) / (2 * math.pi / 24)
"""Share of a circle's area that 24 segments lose: 0.0114."""

SOLIDS = {
    "box": ("box = { from = [0, 0, 0], to = [100, 80, 60] }", 100 * 80 * 60, 0.0),
    "cylinder": ("cylinder = { from = [0, 0, 0], to = [0, 0, 50], diameter = 20 }", math.pi * 100 * 50, LOST),
    "askew": ("cylinder = { from = [0, 0, 0], to = [30, 40, 0], radius = 10 }", math.pi * 100 * 50, LOST),
    "tube": (
        "tube = { from = [0, 0, 0], to = [0, 50, 0], outer_diameter = 20, inner_diameter = 12 }",
        math.pi * (100 - 36) * 50,
        LOST,
    ),
    "cone": ("cone = { from = [0, 0, 0], to = [0, 0, 30], diameter_from = 20, diameter_to = 0 }", math.pi * 1000, 0.02),
    "stump": (
        "cone = { from = [0, 0, 0], to = [0, 0, 30], diameter_from = 20, diameter_to = 10 }",
        math.pi * 10 * (100 + 50 + 25),
        0.02,
    ),
    "sphere": ("sphere = { center = [1, 2, 3], diameter = 20 }", 4 / 3 * math.pi * 1000, 0.03),
    "polygon": (
        "polygon = { points = [[0, 0], [40, 0], [40, 10], [10, 10], [10, 30], [0, 30]], "
        'axis = "x", from = 5, to = 25 }',
        20 * (40 * 10 + 10 * 20),
        0.0,
    ),
}

FLAT = {
    "box": ("box = { from = [0, 0], to = [100, 80] }", 8000, 0.0),
    "disc": ("disc = { center = [5, 5], diameter = 20 }", math.pi * 100, LOST),
    "ring": ("ring = { center = [5, 5], outer_diameter = 20, inner_diameter = 10 }", math.pi * 75, LOST),
    "polygon": ("polygon = { points = [[0, 0], [40, 0], [0, 30]] }", 600, 0.0),
}


@pytest.mark.parametrize("kind", SOLIDS)
def test_solid_volume(kind):
    shape, volume, lost = SOLIDS[kind]
    check_measure(mesh_of(body("it", "a", shape)), volume * 1e-9, lost)


@pytest.mark.parametrize("kind", FLAT)
def test_flat_area(kind):
    shape, area, lost = FLAT[kind]
    check_measure(mesh_of(body("it", "a", shape), dim=2), area * 1e-6, lost)


def check_measure(mesh, exact: float, lost: float):
    """The CAD measure is exact, the mesh lacks at most ``lost`` and has nothing too much."""
    assert mesh.quality["cad_volume"]["it"] == pytest.approx(exact, rel=1e-6)
    meshed = signed_measure(mesh.points, mesh.cells).sum()
    assert exact * (1 - lost * 1.01 - 1e-9) <= meshed <= exact * (1 + 1e-9)


def test_polygon_axis_order():
    """Axis y takes points (z, x)."""
    mesh = mesh_of(body("it", "a", 'polygon = { points = [[0, 0], [30, 0], [0, 10]], axis = "y", from = 0, to = 5 }'))
    assert np.ptp(mesh.points, axis=0) == pytest.approx([0.010, 0.005, 0.030])


def test_more_segments_lose_less(panel):
    """Area lost falls as 1/n^2; the panel's foam gains what the bolt loses."""
    with open_geometry(make_case(panel)) as mesher:
        lost = [
            1 - mesher.mesh(curve_segments=n).quality["mesh_volume"]["bolt"] / mesher.cad_volume["bolt"]
            for n in (16, 32)
        ]
    for n, value in zip((16, 32), lost, strict=True):
        x = 2 * math.pi / n
        assert value == pytest.approx(1 - math.sin(x) / x, rel=1e-6)


def test_later_body_displaces():
    mesh = mesh_of(
        body("first", "a", "box = { from = [0, 0, 0], to = [20, 10, 10] }")
        + body("second", "b", "box = { from = [5, 0, 0], to = [10, 10, 10] }")
        + body("hole", None, "box = { from = [8, 0, 0], to = [12, 10, 10] }")
    )
    volume = mesh.quality["mesh_volume"]
    assert volume["first"] == pytest.approx((5 + 8) * 100e-9)
    assert volume["second"] == pytest.approx(3 * 100e-9)
    assert [b.name for b in mesh.bodies] == ["first", "second"]


def test_body_after_void_fills_it():
    mesh = mesh_of(
        body("block", "a", "box = { from = [0, 0], to = [20, 10] }", "")
        + body("hole", None, "box = { from = [5, 0], to = [15, 10] }")
        + body("plug", "b", "box = { from = [5, 0], to = [10, 10] }"),
        dim=2,
    )
    volume = mesh.quality["mesh_volume"]
    assert volume == pytest.approx({"block": 100e-6, "plug": 50e-6})


def test_repeats_are_one_body():
    mesh = mesh_of(
        body("plate", "a", "box = { from = [0, 0, 0], to = [100, 60, 10] }")
        + body(
            "pin",
            "b",
            "box = { from = [10, 10, 0], to = [15, 15, 10] }",
            "repeat = { step = [[20, 0, 0], [0, 30, 0]], count = [4, 2] }",
        )
    )
    assert mesh.quality["mesh_volume"]["pin"] == pytest.approx(8 * 250e-9)
    assert len(mesh.bodies) == 2


@pytest.mark.parametrize(
    "bodies, number, word",
    [
        (
            body("gone", "a", "box = { from = [1, 1], to = [2, 2] }")
            + body("big", "b", "box = { from = [0, 0], to = [9, 9] }"),
            0,
            "displace",
        ),
        (
            body("one", "a", "box = { from = [0, 0], to = [5, 5] }")
            + body("far", "b", "box = { from = [7, 0], to = [9, 9] }"),
            0,
            "touches no other",
        ),
        (
            body("one", "a", "box = { from = [0, 0], to = [5, 5] }")
            + body("corner", "b", "box = { from = [5, 5], to = [9, 9] }"),
            0,
            "touches no other",
        ),
    ],
)
def test_bodies_out_of_place(bodies, number, word):
    with pytest.raises(CaseError, match=word) as caught:
        mesh_of(bodies, dim=2)
    assert caught.value.faults[0].path == ("body", number)


def test_axisymmetric_needs_positive_radius():
    with pytest.raises(CaseError, match="axis|radius|negative"):
        mesh_of(body("one", "a", "disc = { center = [5, 5], diameter = 20 }"), dim=2, model="axisymmetric = true")


def test_axisymmetric_axis_is_no_boundary():
    mesh = mesh_of(body("one", "a", "box = { from = [0, 0], to = [10, 20] }"), dim=2, model="axisymmetric = true")
    assert mesh.axisymmetric
    x = mesh.points[mesh.facets][:, :, 0]
    assert x.max(axis=1).min() > 1e-6
    length = np.linalg.norm(np.diff(mesh.points[mesh.facets], axis=1)[:, 0], axis=1).sum()
    assert length == pytest.approx(0.010 + 0.020 + 0.010)
