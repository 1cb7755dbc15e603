"""Drawing in children: a crash costs pictures, never answers; a missing GL is said, with the packages."""

import os
import signal

import numpy as np
import pytest

from coldseam.report import artists, draw, render_probe
from coldseam.report.render_probe import Verdict

CRASH = f"import os; os.kill(os.getpid(), {int(signal.SIGSEGV)})"
ONLY_OSMESA = f"""
import os
if os.environ["{render_probe.WINDOW_VARIABLE}"] != "vtkOSOpenGLRenderWindow":
    os.kill(os.getpid(), {int(signal.SIGSEGV)})
print("drawn")
"""


def test_a_crash_is_a_verdict():
    verdict = render_probe.ask(CRASH, 20)
    assert not verdict.able
    assert verdict.why_not.count(f"crashed (signal {int(signal.SIGSEGV)})") == 2


def test_the_second_way_is_tried():
    assert render_probe.ask(ONLY_OSMESA, 20) == Verdict(way="OSMesa", window="vtkOSOpenGLRenderWindow")


@pytest.mark.parametrize(
    "source,words",
    [
        ("import time; time.sleep(30)", "no picture within 1 s"),
        ("print('blank')", "blank"),
        ("raise ImportError('libGL.so.1 is missing')", "libGL.so.1"),
    ],
)
def test_other_failures_are_told(source, words):
    verdict = render_probe.ask(source, 1.0 if "sleep" in source else 20)
    assert not verdict.able and words in verdict.why_not


def test_without_gl_sections_remain_and_the_warning_names_packages(view, tmp_path, monkeypatch):
    monkeypatch.setattr(render_probe, "rendering", lambda: Verdict(way=None, window=None, why_not="EGL: crashed"))
    said = []
    made = artists.draw_all(view("bolted_panel"), tmp_path, lambda stage, message: said.append(message))
    names = [picture.file for picture in made.pictures]
    assert "temperature_section_1.png" in names and "model.png" not in names
    assert all((tmp_path / name).stat().st_size > 5000 for name in names)
    (warning,) = made.warnings
    assert "3D pictures" in warning and "EGL: crashed" in warning and "libegl1" in warning
    assert warning in said


def test_a_crash_while_drawing_costs_one_picture(view, tmp_path, monkeypatch):
    """Whoever draws the temperature dies of it: the others are drawn all the same, and the sentence names it."""
    (tmp_path / "site").mkdir()
    (tmp_path / "site" / "sitecustomize.py").write_text(
        "import os, sys\n"
        "def watch(event, arguments):\n"
        "    if event == 'os.rename' and 'temperature' in str(arguments[1]): os.kill(os.getpid(), 11)\n"
        "if 'coldseam.report.draw' in ' '.join(sys.orig_argv): sys.addaudithook(watch)\n"
    )
    monkeypatch.syspath_prepend(str(tmp_path / "site"))
    monkeypatch.setattr(artists, "_processors", lambda: 1)  # the retry draws what is left
    out = tmp_path / "out"
    out.mkdir()
    made = artists.draw_all(view("square"), out)
    assert [picture.file for picture in made.pictures] == [
        "model.png",
        "heat_flow.png",
        "surface_1.png",
        "surface_2.png",
    ]
    assert made.warnings == ("The picture temperature could not be drawn: drawing crashed (signal 11).",)


def test_a_picture_that_fails_is_named_and_the_rest_is_drawn(view, tmp_path, monkeypatch):
    from coldseam.report import pictures2d

    def fail(*arguments):
        raise ValueError("no reason")

    monkeypatch.setattr(pictures2d, "draw_temperature", fail)
    assert draw.draw_group(view("square"), tmp_path, "flat", tmp_path, tmp_path / "7.list") == 1
    pictures, wrong = artists._outcome(tmp_path, {7: ""})
    assert wrong == ["The picture temperature could not be drawn: no reason."]
    assert {picture.file for picture in pictures} == {"model.png", "heat_flow.png", "surface_1.png", "surface_2.png"}


def test_two_share_the_pictures_and_their_order_stays(view, tmp_path):
    one, two = tmp_path / "1.list", tmp_path / "2.list"
    (tmp_path / "model.taken").touch()
    (tmp_path / "heat_flow.taken").touch()
    draw.draw_group(view("square"), tmp_path, "flat", tmp_path, one)
    for name in ("model", "heat_flow"):
        (tmp_path / f"{name}.taken").unlink()
    draw.draw_group(view("square"), tmp_path, "flat", tmp_path, two)
    pictures, wrong = artists._outcome(tmp_path, {1: "", 2: ""})
    names = [picture.file for picture in pictures]
    assert wrong == [] and names == ["model.png", "temperature.png", "heat_flow.png", "surface_1.png", "surface_2.png"]
    assert len(two.read_text().splitlines()) == 4  # a line before and one after each


def test_artists_that_are_not_needed_end_with_the_block():
    with artists.Artists(2) as idle:
        children, why_not = idle._started.result()
        assert children and why_not == "" and all(child.poll() is None for child in children)
    assert all(child.poll() is not None for child in children)


def test_a_missing_folder_is_a_warning(view, tmp_path):
    made = artists.draw_all(view("tall_panel"), tmp_path / "missing")
    assert made.pictures == () and "there is no folder" in made.warnings[0]


def test_model_of_a_case(view, tmp_path):
    from types import SimpleNamespace

    shown = view("square")
    entry = dict(space=None, temperature=None, heat_flux=None, heat_flow=None, adiabatic=None)
    boundaries = (
        SimpleNamespace(name="cold", **{**entry, "space": "freezer"}),
        SimpleNamespace(name="hot plate", **{**entry, "heat_flux": 0.0}),
        SimpleNamespace(name="cut", **{**entry, "adiabatic": True}),
    )
    case = SimpleNamespace(title="a case", boundary=boundaries, probe=(SimpleNamespace(name="p", at=(0.1, 0.1)),))
    made = artists.draw_model(case, shown.mesh, shown.facet_boundary, tmp_path)
    (picture,) = made.pictures
    assert made.warnings == () and picture.file == "model.png"
    rows = [(*row[:3], pytest.approx(row[3])) for row in picture.table.rows]
    assert rows == [
        ("cold", "space", "freezer", 0.8),
        ("hot plate", "heat flux", None, 0.4),
        ("cut", "adiabatic", None, 0.4),
    ]


needs_gl = pytest.mark.skipif(os.environ.get("COLDSEAM_NO_GL") == "1", reason="no GL on this machine, as told")


@needs_gl
def test_views_in_space(view, tmp_path):
    """With GL (the everyday machine has EGL): all pictures in space, not blank, colours as on the colour bar."""
    if not render_probe.rendering().able:
        pytest.skip(render_probe.rendering().why_not)
    made = artists.draw_all(view("bolted_panel"), tmp_path)
    assert made.warnings == ()
    made = [picture for picture in made.pictures if "section" not in picture.file]
    names = {picture.file for picture in made}
    assert names == {
        "model.png",
        "model_behind.png",
        "surface.png",
        "surface_behind.png",
        "surface_1.png",
        "surface_2.png",
        "surface_1_close.png",
        "surface_2_close.png",
    }
    from PIL import Image

    for name in names:
        image = np.asarray(Image.open(tmp_path / name).convert("RGB"))
        assert len(np.unique(image.reshape(-1, 3).astype(np.int32) @ [65536, 256, 1])) > 100
    # the warm side far from the bolt is at the top of the scale: the last colour of the map, unshaded
    image = np.asarray(Image.open(tmp_path / "surface_1.png").convert("RGB")).reshape(-1, 3).astype(int)
    import matplotlib

    top = np.round(np.array(matplotlib.colormaps["cividis"](1.0)[:3]) * 255)
    assert np.mean(np.abs(image - top).max(axis=1) < 12) > 0.2
    assert all(picture.alt for picture in made)
