"""The chapter of a report with its pictures: each with a caption, an alternative text and the table behind it.

Vector pictures are embedded as they are while they are small, all others as WebP, which takes a third of PNG's size.
"""

from __future__ import annotations

import base64
import io
from pathlib import Path

from coldseam.report.markup import Markup, joined, tag, table, text
from coldseam.report.shown import Shown
from coldseam.report.view import Drawings, Picture, View

LARGEST_VECTOR = 330_000
"""Bytes of an SVG up to which it is embedded; beyond, its raster twin takes less."""
MOST_ROWS = 40


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
    figures = [figure(picture, folder) for picture in drawings.pictures]
    return joined(figures, "\n") if figures else Markup("")


def figure(picture: Picture, folder: Path) -> Markup:
    """Return a picture with caption and table."""
    image = tag("img", "", {"src": source(folder, picture), "alt": picture.alt, "loading": "lazy"})
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
    Image.open(io.BytesIO(content)).convert("RGB").save(stream, "WEBP", quality=82, method=4)
    return _url("image/webp", stream.getvalue())


def _url(kind: str, content: bytes) -> str:
    return f"data:{kind};base64,{base64.b64encode(content).decode()}"
