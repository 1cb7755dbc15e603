"""The files in meshes/: names, exact volumes, and that the scripts still make them."""

import importlib.metadata
import json
import math
import re
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from coldseam.case.read import loads
from coldseam.mesh.boundaries import claim_facets
from coldseam.mesh.foreign import open_foreign
from coldseam.mesh.measure import cell_measure, facet_measure

MADE_WITH = "4.15.2"
MESHES = Path(__file__).resolve().parents[2] / "meshes"
CASE = """
title = "pipe saddle"
[model]
dimensions = 3
mesh = "pipe_saddle.msh"
[spaces.room]
temperature = 20
film = 8
[materials.any]
conductivity = 1
source = "made up"
""" + "".join(
    f'[[body]]\nname = "{name}"\nmaterial = "any"\ngroup = "{name}"\n' for name in ("pipe", "foam", "block", "saddle")
)
BOUNDARIES = "".join(
    f'[[boundary]]\nname = "{name}"\non = {{ group = "{name}" }}\n{what}\n'
    for name, what in (("bore", "temperature = -30"), ("surface", 'space = "room"'))
    + (("foot", "adiabatic = true"), ("cuts", "adiabatic = true"))
)


@pytest.fixture(scope="module")
def saddle():
    case = loads(CASE + BOUNDARIES, MESHES)
    with open_foreign(case) as mesher:
        return case, mesher.mesh()


def ring(inner, outer, low, high):
    """Area (mm²) between polygons of 8 sides over the lower 60 degrees and 9 over the upper 120."""
    area = 0.0
    if low:
        area += 8 * math.sin(math.radians(60 / 8))
    if high:
        area += 9 * math.sin(math.radians(120 / 9))
    return 0.5 * (outer**2 - inner**2) * area


def test_saddle_bodies_have_the_volumes_of_the_drawing(saddle):
    _, mesh = saddle
    volume = dict(
        zip(
            [body.name for body in mesh.bodies],
            np.bincount(mesh.cell_body, weights=cell_measure(mesh)) * 1e9,
            strict=True,
        )
    )
    assert volume["pipe"] == pytest.approx(450 * ring(53.55, 57.15, True, True), rel=1e-9)
    assert volume["block"] == pytest.approx(150 * ring(57.15, 107.15, True, False), rel=1e-9)
    foam = 300 * ring(57.15, 107.15, True, True) + 150 * ring(57.15, 107.15, False, True)
    assert volume["foam"] == pytest.approx(foam, rel=1e-9)
    # The shell's outer polygon has one side over the web and seven beside it; the web ends on that first side.
    over = math.asin(4 / 111.15)
    outer = 0.5 * 111.15**2 * (math.sin(over) + 7 * math.sin((math.radians(60) - over) / 7))
    shell = outer - 0.5 * 107.15**2 * 8 * math.sin(math.radians(7.5))
    web = 4 * (200 - 0.5 * 111.15 * (1 + math.cos(over)))
    assert volume["saddle"] == pytest.approx(150 * (shell + web + 600), rel=1e-9)


def test_saddle_groups_cover_the_surface_once(saddle):
    case, mesh = saddle
    area = np.bincount(claim_facets(case, mesh), weights=facet_measure(mesh)) * 1e6
    chords = 16 * math.sin(math.radians(3.75)) + 18 * math.sin(math.radians(120 / 18))
    assert area[0] == pytest.approx(450 * 53.55 * chords, rel=1e-9)
    assert area[2] == pytest.approx(150 * 60, rel=1e-9)
    upper, lower = (18 * math.sin(math.radians(120 / 18)), 16 * math.sin(math.radians(3.75)))
    foam = 107.15 * (450 * upper + 300 * lower)
    assert area[1] > foam + 150 * (2 * 85)
    ends = 2 * ring(53.55, 107.15, True, True)
    assert area[3] > ends + 2 * 450 * (107.15 - 53.55)


@pytest.mark.parametrize("name", ["pipe_saddle.msh", "support_bracket.step"])
def test_small_enough_to_ship(name):
    assert 0 < (MESHES / name).stat().st_size < 300_000
    text = (MESHES / name).read_text()
    assert not re.search(r"/(home|work|root|tmp|Users)/", text)


def test_bracket_names_its_solids():
    text = (MESHES / "support_bracket.step").read_text()
    names = re.findall(r"PRODUCT\(\s*'([^']*)'", text)
    solids = ["cold plate", "warm plate", "tube", "stud ++", "stud +-", "stud -+", "stud --"]
    assert sorted(names) == sorted(["support bracket", *solids])


READ_BACK = """
import sys, json, gmsh
gmsh.initialize()
gmsh.option.setNumber("General.Terminal", 0)
gmsh.model.occ.importShapes(sys.argv[1])
gmsh.model.occ.synchronize()
print("READ", json.dumps({
    gmsh.model.getEntityName(*e).split("/")[-1]: [gmsh.model.occ.getMass(*e), gmsh.model.occ.getCenterOfMass(*e)]
    for e in gmsh.model.getEntities(3)
}))
"""


def test_bracket_names_belong_to_their_solids():
    run = subprocess.run(
        [sys.executable, "-c", READ_BACK, str(MESHES / "support_bracket.step")],
        capture_output=True, text=True, check=True, timeout=60,
    )  # fmt: skip
    read = json.loads(re.search(r"READ (.*)", run.stdout)[1])
    hole = math.pi * 25
    plate = 6 * (120 * 120 - (4 - math.pi) * 144 - 4 * hole)
    assert read["cold plate"] == [pytest.approx(plate), pytest.approx([0, 0, -3], abs=1e-6)]
    assert read["warm plate"] == [pytest.approx(plate), pytest.approx([0, 0, 103], abs=1e-6)]
    assert read["tube"] == [pytest.approx(100 * (60**2 - 48**2)), pytest.approx([0, 0, 50], abs=1e-6)]
    for name, (x, y) in {"++": (45, 45), "+-": (45, -45), "-+": (-45, 45), "--": (-45, -45)}.items():
        assert read[f"stud {name}"] == [pytest.approx(112 * hole), pytest.approx([x, y, 50], abs=1e-6)]


@pytest.mark.slow
@pytest.mark.parametrize("script", ["pipe_saddle.py", "support_bracket.py"])
def test_scripts_make_what_is_shipped(tmp_path, script):
    made = tmp_path / ("made.msh" if "saddle" in script else "made.step")
    subprocess.run([sys.executable, str(MESHES / script), str(made)], check=True, capture_output=True, timeout=120)
    shipped = MESHES / script.replace(".py", made.suffix)
    if importlib.metadata.version("gmsh") != MADE_WITH:
        pytest.skip(f"the files were made with gmsh {MADE_WITH}")
    assert made.read_text() == shipped.read_text()
