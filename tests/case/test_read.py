"""Reading good cases: SI values, names, materials, files, changes from Python."""

import copy
import hashlib
import math
import pickle
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from case_samples import ALL, BOX, CORNER, PANEL, ROUND
from pydantic import ValidationError

import coldseam
from coldseam.case.read import load, loads, replace
from coldseam.errors import CaseError


@pytest.mark.parametrize("text", ALL.values(), ids=ALL)
def test_samples_are_read_without_warnings(text):
    assert loads(text).warnings == ()


def test_panel_in_si():
    case = loads(PANEL)
    panel, bolts = case.body
    assert case.model.dimensions == 3 and case.model.accuracy == pytest.approx(0.01)
    assert (panel.kind, panel.box.start, panel.box.end) == ("box", (0.0, 0.0, 0.0), (0.3, 0.3, 0.1))
    assert (bolts.cylinder.radius, bolts.cylinder.diameter) == (0.004, 0.008)
    assert bolts.shape is bolts.cylinder and bolts.heat_source == 5.0
    assert bolts.repeat.step == ((0.02, 0.0, 0.0),) and bolts.repeat.count == (2,)
    bay = case.spaces["bay"]
    assert bay.temperature == pytest.approx(25.0, abs=1e-12)  # 77 °F is 25 °C by definition
    assert bay.h == pytest.approx(1 / 0.13) and bay.relative_humidity == pytest.approx(0.6) and bay.name == "bay"
    assert case.materials["bolt"].name == "bolt" and case.materials["bolt"].source == "EN 10088-1 table A.3"
    assert case.boundary[1].on.plane == {"z": 0.0} and case.boundary[1].on.facing == "-z"
    assert case.boundary[2].on == "rest" and case.boundary[2].adiabatic is True
    assert case.boundary[0].h is None
    assert case.limit[0].at_most == 250.0 and (case.limit[0].quantity.target, case.limit[0].quantity.measure) == (
        "space",
        "heat_flow",
    )
    assert case.bridge[0].pieces == 1
    assert case.raw["spaces"]["bay"]["temperature"] == "77 degF"


def test_corner_in_si():
    case = loads(CORNER)
    assert case.model.accuracy == 0.01
    assert case.body[0].polygon.points[2] == (0.5, 0.1)
    wall = case.bridge[0].flanking[0]
    assert wall.layers[0].material == "foam" and wall.layers[0].thickness == 0.1 and wall.layers[0] == ("foam", 0.1)
    assert (wall.length, wall.length_external, wall.between) == (0.4, 0.5, ("bay", "freezer"))
    assert [limit.at_most for limit in case.limit] == pytest.approx([0.02, 0.8])


def test_enclosure_and_zero_resistance():
    case = loads(BOX)
    shell = case.body[0].enclosure
    assert shell.inside.end == (0.4, 0.3, 0.2) and shell.layers == (("pur", 0.08), ("lid", 0.002))
    assert shell.faces == {"+z": (("lid", 0.06),), "-y": ()}
    assert shell.openings[0].axes == ("y", "z") and shell.openings[0].end == (0.1, 0.15)
    assert case.spaces["out"].h == math.inf


def test_heat_in_a_cross_section_is_per_metre():
    """W in an axisymmetric section and in 3D, W/m in a plane one (design.md)."""
    assert loads(ROUND).body[0].heat_source == 3.0
    flat = ROUND.replace("axisymmetric = true\n", "")
    with pytest.raises(CaseError, match="not a unit of heat flow per metre of depth"):
        loads(flat)
    assert loads(flat.replace('"3 W"', '"3 W/m"')).body[0].heat_source == 3.0


def test_frozen():
    case = loads(PANEL)
    with pytest.raises(ValidationError):
        case.spaces["bay"].temperature = 3.0


def test_travels_to_another_process():
    case = loads(PANEL)
    other = pickle.loads(pickle.dumps(case))
    assert other == case and other.source.place(("title",)) == "case text:1" and other.raw == case.raw


def tensor(keys, dim=3, text=PANEL):
    text = text.replace('conductivity = "22 mW/mK"', keys).replace("conductivity = [0.022, 0.03]", keys)
    return loads(text).materials["foam"].tensor(dim)


def test_tensors():
    assert tensor("conductivity = 0.03") == 0.03
    assert np.array_equal(tensor("conductivity = [1, 2, 3]"), np.diag([1.0, 2.0, 3.0]))
    full = [[3.0, 1.0, 0.0], [1.0, 2.0, 0.0], [0.0, 0.0, 1.0]]
    assert np.array_equal(tensor(f"conductivity = {full}"), np.array(full))
    assert np.array_equal(tensor("conductivity = [1, 2, 3]", 2, CORNER), np.diag([1.0, 2.0]))


def test_turned_axes():
    """Along the material's first axis (1, 1, 0)/sqrt 2 heat flows with k = 5: K n = 5 n."""
    k = tensor("conductivity = [5, 1, 2]\naxes = [[0.70711, 0.70711, 0], [-0.70711, 0.70711, 0], [0, 0, 1]]")
    n, m = np.array([1.0, 1.0, 0.0]), np.array([-1.0, 1.0, 0.0])
    assert k @ n == pytest.approx(5 * n, abs=1e-12) and k @ m == pytest.approx(m, abs=1e-12)
    assert k[2, 2] == pytest.approx(2.0)
    flat = tensor("conductivity = [5, 1]\naxes = [[0.6, 0.8], [-0.8, 0.6]]", 2, CORNER)
    # R^T diag(5, 1) R by hand: 5 * 0.36 + 0.64, 4 * 0.48, 5 * 0.64 + 0.36
    assert flat == pytest.approx(np.array([[2.44, 1.92], [1.92, 3.56]]))


def test_library_values_and_overrides():
    from coldseam.case import library

    name = "PIR foam, aged"
    entry = library.lookup(name)
    foam = loads(PANEL.replace('conductivity = "22 mW/mK"', f'library = "{name}"')).materials["foam"]
    assert (foam.conductivity, foam.density, foam.specific_heat) == (
        entry.conductivity,
        entry.density,
        entry.specific_heat,
    )
    assert entry.source in foam.source and foam.library == name
    own = loads(PANEL.replace('"22 mW/mK"', f'"30 mW/mK"\nlibrary = "{name}"')).materials["foam"]
    assert own.conductivity == pytest.approx(0.03) and own.density == entry.density
    assert own.source.endswith("conductivity as given in the case")


def test_unused_material_is_a_warning():
    case = loads(PANEL.replace("[[body]]", '[materials."old foam"]\nconductivity = 1\n\n[[body]]', 1))
    assert case.warnings == ('material "old foam" is used nowhere',)


def test_load_from_a_file(tmp_path):
    file = tmp_path / "panel.toml"
    data = b"\xef\xbb\xbf" + PANEL.replace("\n", "\r\n").encode()
    file.write_bytes(data)
    case = load(file)
    assert case.source.place(("body", 1, "cylinder", "diameter")) == f"{file}:{line_of('cylinder =')}"
    assert case.source.sha256 == hashlib.sha256(data).hexdigest()
    assert case.source.folder == tmp_path and load(str(file)) is not None


def line_of(piece, text=PANEL):
    return next(n for n, line in enumerate(text.split("\n"), 1) if piece in line)


@pytest.mark.parametrize(
    ("make", "words"),
    [
        (lambda path: None, "there is no such file"),
        (lambda path: path.mkdir(), "is a folder"),
        (lambda path: path.write_bytes(b'title = "caf\xe9"\n'), ":1: is not UTF-8"),
        (lambda path: path.write_bytes(b'a = 1\nb = "\xff"'), ":2: is not UTF-8"),
        (lambda path: path.write_text("a = 1\nb = = 2\n"), ":2: is not valid TOML"),
        (lambda path: path.write_text("a = 1\na = 2\n"), ":2: is not valid TOML"),
        (lambda path: path.write_text("a = [1,\n2\n\n"), ":2: is not valid TOML"),
        (lambda path: path.write_text("a = " + "[" * 5000), "nested too deeply"),
        (lambda path: path.write_text(""), "title: is required and missing"),
    ],
)
def test_files_that_cannot_be_read(tmp_path, make, words):
    path = tmp_path / "case.toml"
    make(path)
    with pytest.raises(CaseError) as error:
        load(path)
    assert words in str(error.value) and str(error.value).startswith(str(path)) and error.value.exit_code == 2


def test_a_path_with_a_null_character():
    with pytest.raises(CaseError):
        load("a\0b")


@pytest.mark.parametrize(
    ("key", "value", "read", "expected"),
    [
        ("spaces.bay.temperature", 30, lambda c: c.spaces["bay"].temperature, 30.0),
        ("spaces.bay.temperature", "86 degF", lambda c: c.spaces["bay"].temperature, 30.0),
        ("body[bolts].cylinder.diameter", 10, lambda c: c.body[1].cylinder.radius, 0.005),
        ("body[2].cylinder.diameter", 10, lambda c: c.body[1].cylinder.radius, 0.005),
        ("body.2.cylinder.diameter", np.float64(10), lambda c: c.body[1].cylinder.radius, 0.005),
        ("body[panel].box.to.3", 120, lambda c: c.body[0].box.end[2], 0.12),
        (("body", "panel", "box", "to"), np.array([1, 2, 3]), lambda c: c.body[0].box.end[2], 0.003),
        ('materials."foam".conductivity', 0.03, lambda c: c.materials["foam"].tensor(3), 0.03),
        ("materials.foam.density", 35, lambda c: c.materials["foam"].density, 35.0),
        ("body[bolts].heat_source", None, lambda c: c.body[1].heat_source, None),
        ("model.accuracy", "0.5 %", lambda c: c.model.accuracy, 0.005),
    ],
)
def test_replace(key, value, read, expected):
    case = loads(PANEL)
    before, typed = read(case), copy.deepcopy(case.raw)
    other = replace(case, key, value)
    assert read(other) == (None if expected is None else pytest.approx(expected))
    assert read(case) == before != read(other) and case.raw == typed
    assert other.source.sha256 != case.source.sha256 and len(other.source.changed) == 1
    assert read(loads(other.source.text)) == read(other)


@pytest.mark.parametrize(
    ("key", "value", "words"),
    [
        ("spaces.bey.temperature", 30, 'spaces: has no "bey"; did you mean "bay"?'),
        ("body[bolt].cylinder.diameter", 1, 'body: has no "bolt"; did you mean "bolts"?'),
        ("body.3.name", "x", "there is panel and bolts"),
        ("body.0.name", "x", 'has no "0"'),
        ("title.x.y", 1, "is a single value"),
        ("spaces.bay.temprature", 30, "did you mean"),
        ("materials.foam.conductivity", -1, "must be above 0, not -1"),
        ("spaces.bay.surface_resistance", None, "needs at least one of film, surface"),
        ("", 1, "the key is empty"),
        ("body[", 1, "can't be read as a key"),
    ],
)
def test_replace_refuses(key, value, words):
    with pytest.raises(CaseError) as error:
        replace(loads(PANEL), key, value)
    assert words in str(error.value)


def test_importing_the_models_is_light():
    """The case must not pull in the meshing and drawing libraries (house rule)."""
    heavy = ("gmsh", "vtk", "pyvista", "scipy", "matplotlib", "numpy")
    code = f"import coldseam.case.read; print([m for m in {heavy} if m in sys.modules])"
    # The child must find the package where this process did, installed or not.
    root = str(Path(coldseam.__file__).parents[1])
    code = f"import sys; sys.path.insert(0, {root!r}); {code}"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


def test_more_copies_than_can_be_meshed_are_refused():
    """Not tried for hours: 200 000 by 200 000 bolts."""
    shipped = Path(__file__).parents[2] / "cases/freezer-panel.toml"
    text = shipped.read_text(encoding="utf-8").replace("count = [2, 2]", "count = [200000, 200000]", 1)
    with pytest.raises(CaseError, match="40 000 000 000 copies; at most 10 000"):
        loads(text)
