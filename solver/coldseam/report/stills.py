"""The chapter of a report with its pictures: each with a caption, an alternative text and the table behind it.

Vector pictures are embedded as they are while they are small, all others as WebP, which takes a third of PNG's size.
"""

from __future__ import annotations

import base64
import io
import json
from pathlib import Path

from coldseam.report.markup import Markup, joined, table, tag, text
from coldseam.report.packing import packed
from coldseam.report.shown import Shown
from coldseam.report.view import Drawings, Picture, View

LARGEST_VECTOR = 330_000
"""Bytes of an SVG up to which it is embedded; beyond, its raster twin takes less."""
MOST_ROWS = 40
UNDER_THE_VIEW = ("surface", "temperature")
"""Pictures (of a solid, of a plane model) that the interactive view is laid over."""
KEYS = (
    "Drag to turn, with Shift to move; the wheel enlarges once the view is clicked. Keys: arrows turn, Shift and arrows move, "
    "+ and - enlarge, [ and ] move the cut, Enter reads the middle, Home shows the whole."
)


def stills(view: View, drawings: Drawings, folder: Path, shown: Shown, *, viewer: bool) -> Markup:
    """Return every picture with its table.

    Parameters
    ----------
    view
        The result.
    drawings
        Pictures that lie in ``folder``.
    folder
        Where they lie.
    shown
        Units.
    viewer
        Whether the view that can be turned stands above them.
    """
    under = next((p for p in drawings.pictures if Path(p.file).stem in UNDER_THE_VIEW), None)
    viewer = viewer and under is not None and view.temperature is not None
    figures = [interactive(view, under, folder, shown)] if viewer and under else []
    figures += [figure(picture, folder) for picture in drawings.pictures if not (viewer and picture is under)]
    return joined(figures, "\n") if figures else Markup("")


def interactive(view: View, still: Picture, folder: Path, shown: Shown) -> Markup:
    """Return the view that can be turned and cut, over a picture that stays where scripts don't run."""
    header, block = packed(view, shown)
    cells = json.loads(header)["cells"]
    told = ""
    if cells["shown"] < cells["whole"]:
        told = (f"Thinned for this page: {cells['shown']} of the {cells['whole']} elements of the solution; temperatures "
                f"differ from it by at most {shown.difference_fine(cells['error'])}. ")  # fmt: skip
    told += "On a cut the view shows the solved field itself, interpolated within each element."
    parts = [
        _controls(view),
        tag("div", [
            tag("img", "", {"src": source(folder, still), "alt": still.alt}),
            tag("canvas", "", {"tabindex": "0", "role": "application", "aria-describedby": "view-keys", "aria-label":
                "Interactive view of the model: " + still.alt}),
        ], {"class": "stage"}),
        tag("div", "", {"class": "legend", "data-view": "legend"}),
        tag("output", "Point at the model to read it.", {"data-view": "reading", "class": "reading"}),
        tag("p", KEYS, {"class": "controls soft", "id": "view-keys"}),
        tag("p", told, {"class": "view-note soft"}),
        tag("figcaption", f"{still.title}; with scripts, the model to turn, cut and read"),
        numbers(still),
        Markup(f'<script type="application/json" id="view-header">{header}</script>'),
        Markup(f'<script type="application/octet-stream" id="view-block">{block}</script>'),
    ]  # fmt: skip
    return tag("figure", parts, {"id": "view"})


def _controls(view: View) -> Markup:
    axes = tuple("xyz"[: view.mesh.dim])
    options = [tag("option", "no cut", {"value": "-1"})]
    options += [tag("option", f"across {axis}", {"value": str(k)}) for k, axis in enumerate(axes)]
    solid = {"class": "solid-only"}
    fields = [
        tag("label", ["Show ", tag("select", "", {"data-view": "field"})]),
        tag("label", [tag("input", "", {"type": "checkbox", "data-view": "lines", "checked": True}), " isotherms"]),
        tag("label", ["Cut ", tag("select", options, {"data-view": "axis"})], solid),
        tag("label", ["at ", tag("input", "", {"type": "range", "min": "0", "max": "1000", "value": "500",
            "data-view": "cut", "disabled": True}), " ", tag("span", "", {"data-view": "cut-place"})], solid),
        *(tag("button", words, {"type": "button", "data-view": key})
          for key, words in (("nearer", "Larger"), ("farther", "Smaller"), ("home", "Whole model"))),
    ]  # fmt: skip
    return tag("div", fields, {"class": "controls", "role": "group", "aria-label": "What the view shows"})


def figure(picture: Picture, folder: Path) -> Markup:
    """Return a picture with caption and table."""
    image = tag("img", "", {"src": source(folder, picture), "alt": picture.alt})
    caption = tag("figcaption", picture.title)
    return tag("figure", [image, caption, numbers(picture)])


def numbers(picture: Picture) -> Markup:
    """Return the table behind a picture, folded up."""
    rows = [[_cell(value) for value in row] for row in picture.table.rows]
    if not rows:
        return Markup("")
    shown = rows[:MOST_ROWS]
    left = f" (the first {len(shown)} of {len(rows)} rows)" if len(rows) > len(shown) else ""
    return tag("details", [tag("summary", f"Numbers of this picture{left}"),
                           table(picture.title, picture.table.columns, shown)])  # fmt: skip


def _cell(value: object) -> Markup:
    if isinstance(value, float):
        return text(f"{value:.5g}")
    return text("" if value is None else value)


def source(folder: Path, picture: Picture) -> str:
    """Return a picture as a data URL."""
    if picture.vector and (folder / picture.vector).stat().st_size <= LARGEST_VECTOR:
        return _url("image/svg+xml", (folder / picture.vector).read_bytes())
    return raster(folder / picture.file)


def raster(file: Path) -> str:
    """Return a PNG as a data URL, as WebP where that can be made."""
    content = file.read_bytes()
    try:
        from PIL import Image, features
    except ImportError:
        return _url("image/png", content)
    if not features.check("webp"):
        return _url("image/png", content)
    stream = io.BytesIO()
    Image.open(io.BytesIO(content)).convert("RGB").save(stream, "WEBP", quality=82, method=2)
    return _url("image/webp", stream.getvalue())


def _url(kind: str, content: bytes) -> str:
    return f"data:{kind};base64,{base64.b64encode(content).decode()}"
