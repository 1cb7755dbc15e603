"""CAD files: names, displacement, refusals. The STEP files are written by gmsh in a child process."""

from __future__ import annotations

import re
import subprocess
import sys

import pytest
from geometry_cases import make_case

from coldseam.errors import CaseError
from coldseam.geometry.mesher import open_geometry

WRITE = """
import sys, gmsh
gmsh.initialize(); gmsh.option.setNumber("General.Terminal", 0)
gmsh.option.setString("Geometry.OCCTargetUnit", "MM")
occ = gmsh.model.occ
if sys.argv[2] == "two":
    a, b = occ.addBox(0, 0, 0, 10, 10, 10), occ.addBox(10, 0, 0, 5, 10, 10)
    occ.fragment([(3, a)], [(3, b)]); occ.synchronize()
elif sys.argv[2] == "one":
    occ.addBox(0, 0, 0, 10, 10, 10); occ.synchronize()
else:
    occ.addRectangle(0, 0, 0, 10, 10); occ.synchronize()
gmsh.write(sys.argv[1]); gmsh.finalize()
"""


def write(path, what: str):
    subprocess.run([sys.executable, "-c", WRITE, str(path), what], check=True, timeout=120)


def write_named(path):
    """Write two solids called ``case`` (10 mm) and ``fin``; gmsh itself writes running numbers for names."""
    write(path, "two")
    text = path.read_text()
    for number, name in (("1.1", "case"), ("1.2", "fin")):
        text = re.sub(rf"'[^']* {re.escape(number)}'", f"'{name}'", text)
    path.write_text(text)


def from_file(folder, name: str, rest: str = 'material = "a"'):
    return make_case(f'[[body]]\nname = "part"\nfile = "{name}"\n{rest}\n', folder=folder)


def test_step_in_millimetres(tmp_path):
    write(tmp_path / "one.step", "one")
    with open_geometry(from_file(tmp_path, "one.step")) as mesher:
        mesh = mesher.mesh()
    assert [b.name for b in mesh.bodies] == ["part"]
    assert mesh.quality["mesh_volume"]["part"] == pytest.approx(1e-6)


@pytest.mark.parametrize("ending", ["step", "brep"])
def test_two_solids(tmp_path, ending):
    write(tmp_path / f"two.{ending}", "two")
    with open_geometry(from_file(tmp_path, f"two.{ending}")) as mesher:
        mesh = mesher.mesh()
    assert len(mesh.bodies) == 2
    assert all(b.name.startswith("part/") and b.material == "a" for b in mesh.bodies)
    assert sorted(mesh.quality["mesh_volume"].values()) == pytest.approx([0.5e-6, 1e-6])


def test_materials_by_solid(tmp_path):
    write_named(tmp_path / "two.step")
    rest = '[body.materials]\ncase = "a"\nfin = "b"'
    with open_geometry(from_file(tmp_path, "two.step", rest)) as mesher:
        assert {b.name: b.material for b in mesher.bodies} == {"part/case": "a", "part/fin": "b"}
        assert mesher.cad_volume == pytest.approx({"part/case": 1e-6, "part/fin": 0.5e-6})
    with pytest.raises(CaseError, match="no solid of that file"):
        with open_geometry(from_file(tmp_path, "two.step", 'material = "a"\n[body.materials]\nnone = "b"')):
            pass


def test_repeated_file_moves(tmp_path):
    write(tmp_path / "one.step", "one")
    rest = 'material = "a"\nrepeat = { step = [[10, 0, 0]], count = [3] }'
    with open_geometry(from_file(tmp_path, "one.step", rest)) as mesher:
        mesh = mesher.mesh()
    assert mesh.points[:, 0].max() == pytest.approx(0.030)
    assert mesh.quality["mesh_volume"]["part"] == pytest.approx(3e-6)


def test_open_surfaces(tmp_path):
    write(tmp_path / "sheet.step", "sheet")
    with pytest.raises(CaseError, match="only open surfaces"):
        with open_geometry(from_file(tmp_path, "sheet.step")):
            pass


def test_empty_and_broken_files(tmp_path):
    (tmp_path / "empty.step").touch()
    (tmp_path / "broken.step").write_text("ISO-10303-21;\nHEADER;\nnonsense\n")
    for name in ("empty.step", "broken.step"):
        with pytest.raises(CaseError, match=name):
            with open_geometry(from_file(tmp_path, name)):
                pass


def test_missing_file(tmp_path):
    with pytest.raises(CaseError, match="none.step"):
        with open_geometry(from_file(tmp_path, "none.step")):
            pass


def test_scripts_are_refused(tmp_path):
    mark = tmp_path / "ran"
    (tmp_path / "part.geo").write_text(
        f'SetFactory("OpenCASCADE"); SystemCall "touch {mark}"; Box(1) = {{0,0,0,1,1,1}};'
    )
    with pytest.raises(CaseError):
        with open_geometry(from_file(tmp_path, "part.geo")):
            pass
    # nor under a name that hides it
    (tmp_path / "part.geo").rename(tmp_path / "part.step")
    with pytest.raises(CaseError):
        with open_geometry(from_file(tmp_path, "part.step")):
            pass
    assert not mark.exists()
