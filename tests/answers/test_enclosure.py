"""A whole box: mean area, K, the handbook's sum, the share of edges and corners."""

from __future__ import annotations

import math

import pytest

from coldseam.answers.enclosure import enclosures
from coldseam.answers.limits import limits
from coldseam.case import read
from coldseam.geometry.mesher import open_geometry
from coldseam.solution.steady import solve_on
from coldseam.study import run

FURNACE = """
title = "an eighth of a cubic furnace"
[model]
dimensions = 3
accuracy = "3 %"
[spaces.inside]
temperature = 500
surface_resistance = 0
[spaces.outside]
temperature = 50
surface_resistance = 0
[materials.firebrick]
conductivity = 1.04
[[body]]
name = "walls"
enclosure.inside = { from = [0, 0, 0], to = [250, 250, 250] }
enclosure.layers = [["firebrick", 100]]
enclosure.faces = { "-x" = [], "-y" = [], "-z" = [] }
[[boundary]]
name = "hot"
on = { within = { from = [0, 0, 0], to = [250, 250, 250] } }
space = "inside"
[[boundary]]
name = "cold x"
on = { plane = { x = 350 } }
space = "outside"
[[boundary]]
name = "cold y"
on = { plane = { y = 350 } }
space = "outside"
[[boundary]]
name = "cold z"
on = { plane = { z = 350 } }
space = "outside"
[[boundary]]
name = "symmetry"
on = "rest"
adiabatic = true
"""
K = 1.04
EDGE, CORNER = 0.558729, 0.1053
"""Exact excess of an edge (conformal mapping) and of a corner (0.1053 +- 0.0003, Richardson on four grids)."""


@pytest.fixture(scope="module")
def furnace():
    return run(read.loads(FURNACE)).answers


def test_exact_and_handbook_sums(furnace):
    """Holman, chapter 3: S = 18.36 m by the handbook's sum; exact 18.44 m. An eighth of each."""
    entry = furnace.enclosures["walls"]
    assert 8 * entry["handbook"]["total"] / K == pytest.approx(18.36, abs=1e-9)
    exact = 15 + 12 * 0.5 * EDGE + 8 * 0.1 * CORNER
    assert exact == pytest.approx(18.44, abs=0.005)
    slack = 8 * 0.1 * 0.0003
    assert 8 * entry["leak_low"] / K <= exact + slack and exact - slack <= 8 * entry["leak_high"] / K
    assert 8 * entry["leak"] / K == pytest.approx(exact, rel=0.01)


def test_corner_s_own_share(furnace):
    """chi of the three-wall corner on inside dimensions: what is left after the walls and edges, 0.1053 k t."""
    entry = furnace.enclosures["walls"]
    walls, edges = 3 * 0.25**2 / 0.1, 3 * 0.25 * EDGE
    left = [entry[key] / K - walls - edges for key in ("leak_low", "leak_high")]
    assert left[0] <= 0.1 * CORNER <= left[1]


def test_areas_and_k(furnace):
    entry = furnace.enclosures["walls"]
    assert entry["inside_area"] == pytest.approx(3 * 0.25**2)
    assert entry["outside_area"] == pytest.approx(3 * 0.35**2)
    assert entry["mean_area"] == pytest.approx(3 * 0.25 * 0.35)
    assert entry["K"] == pytest.approx(entry["leak"] / entry["mean_area"])
    assert entry["K_low"] <= entry["K"] <= entry["K_high"]
    assert entry["within_ATP_limit"] == {"IR": False, "IN": False}
    assert entry["closed_faces"] == ["+x", "+y", "+z"]
    assert "part of a box" in entry["remarks"][0]


def test_k_has_limits(furnace):
    k = furnace.enclosures["walls"]["K"]
    text = '\n[[limit]]\nname = "K"\nquantity = { body = "walls", K = true }\nat_most = '
    found = {met: limits(read.loads(f"{FURNACE}{text}{bound * k}"), furnace)["K"] for met, bound in BOUNDS}
    assert all(entry["met"] == met and entry["unit"] == "W/(m²·K)" for met, entry in found.items())
    assert found[True]["low"] <= k <= found[True]["high"]


BOUNDS = ((True, 1.1), (False, 0.9))


def test_edges_and_corners_share(furnace):
    entry = furnace.enclosures["walls"]
    plain = 3 * 0.25**2 * K / 0.1
    assert entry["plain_walls"] == pytest.approx(plain)
    assert entry["edges_and_corners_share"] == pytest.approx(1 - plain / entry["leak"])
    parts = furnace.losses["inside"]["parts"]
    assert parts["plain walls"]["heat_flow"] == pytest.approx(450 * plain)
    assert parts["edges and corners"]["heat_flow"] == pytest.approx(450 * (entry["leak"] - plain), rel=1e-6)


def first_mesh(text: str) -> dict:
    """Return the enclosures of a case solved on its first mesh only."""
    case = read.loads(text)
    with open_geometry(case) as mesher:
        return enclosures(solve_on(case, mesher.mesh()))


def test_whole_box_with_films_and_two_layers():
    """Areas from all six faces, each with its own layers; plain walls with the films of the two sides."""
    text = """
title = "a coarse box"
[model]
dimensions = 3
accuracy = "20 %"
[spaces.inside]
temperature = 5
film = 5
[spaces.ambient]
temperature = 30
surface_resistance = 0.04
[materials.foam]
conductivity = 0.025
[materials.shell]
conductivity = 0.25
[[body]]
name = "box"
enclosure.inside = { from = [0, 0, 0], to = [400, 300, 200] }
enclosure.layers = [["foam", 50], ["shell", 10]]
enclosure.faces = { "+z" = [["foam", 80]] }
[[boundary]]
name = "outside"
on = { shell = "outer" }
space = "ambient"
[[boundary]]
name = "inside"
on = { shell = "cavity" }
space = "inside"
"""
    entry = first_mesh(text)["box"]
    assert (entry["inside"], entry["outside"]) == ("inside", "ambient")
    assert entry["inside_area"] == pytest.approx(2 * (0.12 + 0.08 + 0.06))
    x, y, z = 0.52, 0.42, 0.34
    assert entry["outside_area"] == pytest.approx(2 * (x * y + y * z + x * z))
    assert entry["mean_area"] == pytest.approx(math.sqrt(entry["inside_area"] * entry["outside_area"]))
    walls, lid = 1 / (0.24 + 2 + 0.04), 1 / (0.24 + 3.2)
    assert entry["plain_walls"] == pytest.approx(walls * (0.12 + 2 * 0.08 + 2 * 0.06) + lid * 0.12, rel=1e-9)
    edge = 0.06 / 2.04
    lid_edge = (edge + 0.08 / 3.2) / 2
    expected = 0.54 * (edge * (0.4 * 2 + 0.3 * 2 + 0.2 * 4) + lid_edge * (0.4 * 2 + 0.3 * 2))
    assert entry["handbook"]["edges"] == pytest.approx(expected, rel=1e-9)
    assert entry["within_ATP_limit"]["IN"]
    assert 0.7 < entry["handbook"]["over_computed"] < 1.3


def test_contents_make_k_undefined():
    """Two temperatures inside: no K, and the remark says why."""
    box = "{ from = [0, 0, 0], to = [250, 250, 250] }"
    hot = f'name = "hot"\non = {{ within = {box} }}\nspace = "inside"'
    faces = {"x": 'space = "inside"', "y": "heat_flux = 0", "z": 'space = "third"'}
    split = "\n[[boundary]]\n".join(
        f'name = "to {axis}"\non = {{ plane = {{ {axis} = 250 }}, within = {box} }}\n{what}'
        for axis, what in faces.items()
    )
    assert hot in FURNACE
    text = FURNACE.replace(hot, split)
    text = text.replace("[materials.firebrick]", "[spaces.third]\ntemperature = 400\nfilm = 5\n[materials.firebrick]")
    entry = first_mesh(text)["walls"]
    assert "K" not in entry
    assert "one temperature inside" in entry["remarks"][-1] and "inside, third" in entry["remarks"][-1]
