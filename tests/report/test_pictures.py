"""Every kind of picture: drawn, not blank, readable in grey, nothing cut, no label on another."""

import itertools
from dataclasses import replace

import numpy as np
import pytest

from coldseam.report import labels, page, pictures2d, profiles, style
from coldseam.report.plane import section_of_plane_model

PLANE = [
    (name, draw)
    for name in ("square", "panel2d", "pipe")
    for draw in ("draw_model", "draw_temperature", "draw_heat_flow")
]
PLANE += [("tall_panel", "draw_model"), ("tall_panel", "draw_temperature"), ("channel", "draw_heat_flow")]


@pytest.fixture
def pages(monkeypatch):
    """Collect the finished pages just before they are written."""
    found = []
    real = page.save

    def keep(made, folder, name, *, vector):
        found.append(made)
        return real(made, folder, name, vector=vector)

    monkeypatch.setattr(page, "save", keep)
    return found


def texts(made):
    from matplotlib.text import Text

    shown = [text for text in made.figure.findobj(Text) if text.get_visible() and text.get_text().strip()]
    for ax in made.figure.axes:  # tick labels beyond the limits exist but are not drawn
        for axis, (low, high) in ((ax.xaxis, sorted(ax.get_xlim())), (ax.yaxis, sorted(ax.get_ylim()))):
            for tick in itertools.chain(axis.get_major_ticks(), axis.get_minor_ticks()):
                if not low <= tick.get_loc() <= high or not ax.axison:
                    shown = [text for text in shown if text not in (tick.label1, tick.label2)]
        if not ax.axison:
            shown = [text for text in shown if text not in (ax.xaxis.label, ax.yaxis.label)]
    return shown


def check_layout(made):
    made.figure.canvas.draw()
    canvas = made.figure.bbox
    boxes = []
    for text in texts(made):
        box = text.get_window_extent()
        assert box.x0 >= 0 and box.y0 >= 0 and box.x1 <= canvas.width + 0.5 and box.y1 <= canvas.height + 0.5, text
        boxes.append((text, box))
    for (a, box), (b, other) in itertools.combinations(boxes, 2):
        apart = box.x1 <= other.x0 + 1 or other.x1 <= box.x0 + 1 or box.y1 <= other.y0 + 1.5 or other.y1 <= box.y0 + 1.5
        assert apart, f"{a.get_text()!r} on {b.get_text()!r}"


def check_image(path):
    from PIL import Image

    image = np.asarray(Image.open(path).convert("RGB"))
    assert len(np.unique(image.reshape(-1, 3).astype(np.int32) @ [65536, 256, 1])) > 30
    grey = np.asarray(Image.open(path).convert("L"), dtype=float)
    assert grey.std() > 8 and grey.min() < 80 and grey.max() > 250
    border = np.concatenate([grey[:4].ravel(), grey[-4:].ravel(), grey[:, :4].ravel(), grey[:, -4:].ravel()])
    assert border.min() > 250  # nothing runs into the edge


@pytest.mark.parametrize("name,draw", PLANE)
def test_plane_pictures(view, pages, tmp_path, name, draw):
    shown = view(name)
    picture = getattr(pictures2d, draw)(shown, section_of_plane_model(shown), tmp_path, "p")
    assert picture.file == "p.png" and (tmp_path / "p.svg").stat().st_size > 2000
    assert picture.title and picture.alt and picture.table.columns and picture.table.rows
    check_image(tmp_path / "p.png")
    (made,) = pages
    with style.applied():
        check_layout(made)


@pytest.mark.parametrize("name", ["square", "pipe"])
def test_surface_charts(view, pages, tmp_path, name):
    shown = view(name)
    for space in shown.spaces:
        picture = profiles.draw_surface(shown, space, tmp_path, f"surface_{space}")
        check_image(tmp_path / picture.file)
        nodes = np.unique(shown.mesh.facets[shown.faces_space(space)])
        assert f"Lowest {style.degrees(shown.temperature[nodes].min(), 2)}" in picture.alt
    with style.applied():
        for made in pages:
            check_layout(made)


def test_every_isotherm_of_a_roomy_picture_is_labelled(view, pages, tmp_path):
    shown = view("channel")
    pictures2d.draw_temperature(shown, section_of_plane_model(shown), tmp_path, "p")
    labelled = {text.get_text() for text in pages[0].ax.texts}
    levels = style.round_levels(shown.temperature.min(), shown.temperature.max())
    assert labelled == {style.degrees(level, style.decimals(levels)) for level in levels}


def test_colour_falls_steadily_in_grey_across_a_wall(view, tmp_path, pages):
    """From the warm to the cold face the drawn grey must fall: the picture works in a grey print."""
    shown = view("tall_panel")
    pictures2d.draw_temperature(shown, section_of_plane_model(shown), tmp_path, "p")
    from PIL import Image

    made = pages[0]
    grey = np.asarray(Image.open(tmp_path / "p.png").convert("L"), dtype=float)
    across = made.ax.transData.transform(np.stack([np.linspace(5, 95, 200), np.full(200, 1500.0)], axis=1))
    rows = (grey.shape[0] - across[:, 1]).astype(int)
    columns = across[:, 0].astype(int)
    band = np.median([grey[rows + shift, columns] for shift in range(-3, 4)], axis=0)
    smooth = np.array([np.median(part) for part in np.array_split(band, 10)])
    assert np.all(np.diff(smooth) > -6) and smooth[-1] - smooth[0] > 100


@pytest.mark.parametrize("ratio", [50.0, 1 / 50, 1.0, 12 / 0.1])
def test_extreme_shapes_get_a_usable_page(ratio):
    low, high = np.zeros(2), np.array([1000.0 * ratio, 1000.0])
    with style.applied():
        made = page.open_page(low, high, heading="T" * 90, title="words and words " * 20, axes=("x", "y"), bar=True,
                              notes=("a note that goes on " * 12,))  # fmt: skip
        page.colour_bar(made, -20.0, 25.0, style.round_levels(-20, 25))
        check_layout(made)
        box = made.ax.get_window_extent()
        assert min(box.width, box.height) > 0.75 * style.DPI


def test_thin_skins_show_in_a_close_up_and_a_note(view, pages, tmp_path):
    shown = view("panel2d")
    section = section_of_plane_model(shown)
    pictures2d.draw_model(shown, section, tmp_path, "p")
    assert pages[0].detail is not None
    captions = " ".join(text.get_text() for text in pages[0].figure.texts)
    assert "Close-up A" in captions and "0.5 mm" in captions.replace("\n", " ")
    pictures2d.draw_temperature(shown, section, tmp_path, "q")
    notes = " ".join(text.get_text() for text in pages[1].figure.texts).replace("\n", " ")
    assert "Thinner than the line" in notes and "y is drawn 10 times larger" in notes


def test_hostile_names_are_drawn_as_typed(view, pages, tmp_path):
    from dataclasses import replace

    shown = replace(view("square"), title=r"100 $ \frac{1} _x <b>", boundary_names=("_a$b$", "x" * 300, "β^2_{"))
    pictures2d.draw_model(shown, section_of_plane_model(shown), tmp_path, "p")
    with style.applied():
        check_layout(pages[0])
    assert any("$ \\frac" in text.get_text() for text in pages[0].figure.texts)


def test_many_boundaries_stay_on_the_page(view, pages, tmp_path):
    from dataclasses import replace

    shown = view("square")
    n = len(shown.mesh.facets)
    names = tuple(f"boundary number {k}" for k in range(n))
    many = replace(shown, facet_boundary=np.arange(n), boundary_names=names, boundary_space=("s",) * n,
                   boundary_kind=("space",) * n)  # fmt: skip
    picture = pictures2d.draw_model(many, section_of_plane_model(many), tmp_path, "p")
    with style.applied():
        check_layout(pages[0])
    assert len(picture.table.rows) == n


def test_even_temperature_is_drawn_and_said(view, pages, tmp_path):
    from dataclasses import replace

    shown = replace(view("square"), temperature=np.full(view("square").mesh.n_nodes, 20.0),
                    cell_flux=np.zeros_like(view("square").cell_flux))  # fmt: skip
    section = section_of_plane_model(shown)
    pictures2d.draw_temperature(shown, section, tmp_path, "p")
    assert "too even for isotherms" in " ".join(text.get_text() for text in pages[0].figure.texts)
    assert "No heat flows" in pictures2d.draw_heat_flow(shown, section, tmp_path, "q").alt


def test_labels_keep_apart_and_inside():
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    with style.applied():
        figure = Figure(figsize=(3, 2))
        FigureCanvasAgg(figure)
        ax = figure.add_axes([0.1, 0.1, 0.8, 0.8])
        x = np.linspace(0.3, 0.7, 100)  # far more lines than the place has room for
        wanted = [
            labels.Wanted(text=f"{k} °C", points=np.stack([x, 0.3 + 0.02 * k + 0 * x], axis=1)) for k in range(21)
        ]
        made = labels.set_labels(ax, wanted)
        assert 4 <= len(made) < 21
        frame = ax.get_window_extent()
        boxes = labels.boxes(made)
        assert np.all(boxes[:, :2] >= [frame.x0, frame.y0]) and np.all(boxes[:, 2:] <= [frame.x1, frame.y1])
        for a, b in itertools.combinations(boxes, 2):
            assert a[2] <= b[0] or b[2] <= a[0] or a[3] <= b[1] or b[3] <= a[1]


def test_same_view_same_bytes(view, tmp_path):
    shown = view("tall_panel")
    section = section_of_plane_model(shown)
    for name in ("a", "b"):
        pictures2d.draw_temperature(shown, section, tmp_path, name)
    assert (tmp_path / "a.png").read_bytes() == (tmp_path / "b.png").read_bytes()
    assert (tmp_path / "a.svg").read_bytes() == (tmp_path / "b.svg").read_bytes()


def test_inch_pictures_have_round_fahrenheit_values_and_no_metric_unit(view, tmp_path):
    import re

    from coldseam.report.shown import Shown
    from coldseam.report.view import boundary_areas, in_drawing_units

    metric = replace(view("square"), shown=Shown(system="inch", flat=True))
    drawn = in_drawing_units(metric)
    assert np.allclose(drawn.temperature, 1.8 * metric.temperature + 32)
    assert np.allclose(boundary_areas(drawn), boundary_areas(metric))
    section = section_of_plane_model(drawn)
    made = [
        pictures2d.draw_model(drawn, section, tmp_path, "model"),
        pictures2d.draw_temperature(drawn, section, tmp_path, "temperature"),
        pictures2d.draw_heat_flow(drawn, section, tmp_path, "flow"),
    ]
    told = " ".join([str((picture.alt, picture.table)) for picture in made])
    assert not re.search(r"°C|\bmm\b|\bW\b|m²", told)
    assert "area, ft²/ft" in told and "Btu/(h·ft)" in told
    read = [float(v.replace("−", "-")) for v in re.findall(r"(−?\d+(?:\.\d+)?) °F", made[1].alt.split("Isotherms")[1])]
    assert len(read) > 3 and all(value % 5 == 0 for value in read)


def test_heat_between_inch_lines_is_that_between_metric_ones(view):
    from coldseam.report.flow import flow_lines
    from coldseam.report.shown import Shown
    from coldseam.report.stream import stream_function
    from coldseam.report.view import in_drawing_units

    metric = replace(view("square"), shown=Shown(system="inch", flat=True))
    drawn = in_drawing_units(metric)
    spans = [np.ptp(stream_function(section_of_plane_model(each)).values) for each in (metric, drawn)]
    assert spans[1] / spans[0] == pytest.approx(3600 * 0.3048 / 1055.05585262)  # W/m -> Btu/(h·ft), by definition
    assert "Btu/h per foot of depth" in flow_lines(drawn, section_of_plane_model(drawn)).note


def test_large_triangles_are_shaded_in_steps_of_the_scale():
    corner, values = np.array([[[0.0, 0.0], [1.0, 0.0], [0.0, 1.0]]]), np.array([[0.0, 1.0, 1.0]])
    parts, shades = pictures2d._evenly_shaded(corner, values, 0.3)
    assert np.ptp(shades, axis=1).max() <= 0.3
    assert np.allclose(shades, parts.sum(axis=2))  # the same linear field, x + y
    u, v = parts[:, 1] - parts[:, 0], parts[:, 2] - parts[:, 0]
    assert 0.5 * np.abs(u[:, 0] * v[:, 1] - u[:, 1] * v[:, 0]).sum() == pytest.approx(0.5)
