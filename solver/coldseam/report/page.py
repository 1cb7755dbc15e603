"""The page a picture stands on: title, drawing, colour bar, detail, legend and notes, never overlapping.

The drawing gets the room its shape needs and everything else a place of its own, measured before
it is set; nothing is laid over the drawing. Shapes longer than 6 : 1 are drawn with one direction
enlarged by a round factor, and the page says so.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from coldseam.report import style

WIDTH = 7.6
LEFT, RIGHT, TOP, BOTTOM = 0.78, 0.30, 0.16, 0.14
BAR_ROOM = 0.95
TALLEST = 5.0
LONGEST = 6.0
PAD = 0.22
PACKED = 3
"""How hard PNGs are compressed: a half more bytes than the hardest, in a quarter of the time."""


@dataclass(frozen=True, kw_only=True)
class Page:
    """A figure with its axes: ``ax`` for the drawing, ``bar`` for the colour bar, ``detail`` for a close-up."""

    figure: Any
    ax: Any
    bar: Any | None
    detail: Any | None
    stretch: tuple[float, float]


def stretch_for(width: float, height: float) -> tuple[float, float]:
    """Return by how much x and y are enlarged so that no shape is longer than ``LONGEST`` to 1."""
    ratio = max(width, 1e-30) / max(height, 1e-30)
    need = max(ratio, 1 / ratio) / LONGEST
    if need <= 1:
        return 1.0, 1.0
    factor = next(n * 10.0**k for k in range(12) for n in (2, 5, 10) if n * 10.0**k >= need * 0.999)
    return (1.0, factor) if ratio > 1 else (factor, 1.0)


def stretch_note(stretch: tuple[float, float], axes: tuple[str, str]) -> str | None:
    """Return the sentence that says what was enlarged."""
    for factor, axis in zip(stretch, axes, strict=True):
        if factor > 1:
            return f"Not to scale: {axis} is drawn {factor:g} times larger than the other direction."
    return None


def open_page(
    low: np.ndarray,
    high: np.ndarray,
    *,
    heading: str,
    title: str,
    axes: tuple[str, str],
    unit: str = "mm",
    bar: bool = False,
    detail: str | None = None,
    legend: tuple[list, list[str]] | None = None,
    notes: tuple[str, ...] = (),
) -> Page:
    """Return a page for a drawing that spans ``low`` to ``high`` (mm, shape (2,)).

    Parameters
    ----------
    heading, title
        What the picture shows, and the case's title.
    axes
        Names of the coordinates; ("", "") leaves the axes out (views in space).
    unit
        Of both coordinates.
    bar
        Leave room for a colour bar at the right.
    detail
        Caption of a close-up below the drawing, or None.
    legend
        Handles and labels.
    notes
        Sentences below everything.
    """
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    span = np.maximum(high - low, 1e-12)
    stretch = stretch_for(*span) if axes[0] else (1.0, 1.0)
    left = LEFT if axes[0] else 0.25
    foot = 0.55 if axes[0] else 0.08
    room = WIDTH - left - RIGHT - (BAR_ROOM if bar else 0)
    edge = 2 * PAD if axes[0] else 0.0
    shown = span * np.array(stretch)
    scale = min((room - edge) / shown[0], (TALLEST - edge) / shown[1])
    wide, tall = shown * scale + edge
    beside_at = left + wide + (BAR_ROOM if bar else 0) + 0.35
    beside = WIDTH - beside_at - RIGHT >= 2.4 and not detail  # tall shapes: legend and notes at the right
    text_at = beside_at if beside else left

    figure = Figure(figsize=(WIDTH, 20))
    FigureCanvasAgg(figure)
    note_text = [style.wrapped(note, WIDTH - text_at - RIGHT, style.SMALL, 6) for note in notes if note]
    note_tall = sum(0.145 * (text.count("\n") + 1) + 0.03 for text in note_text) + (0.08 if note_text else 0)
    head = style.wrapped(heading, WIDTH - left - RIGHT, style.HEAD, 2, bold=True)
    sub = style.wrapped(title, WIDTH - left - RIGHT, style.TEXT, 2) if title else ""
    head_tall = 0.21 * (head.count("\n") + 1) + (0.165 * (sub.count("\n") + 1) if sub else 0) + 0.16
    made_legend, legend_tall = _legend(figure, legend, WIDTH - text_at - RIGHT)
    detail_tall = 2.35 if detail else 0.0
    texts_tall = detail_tall + legend_tall + note_tall
    total = TOP + head_tall + BOTTOM + (max(tall + foot, texts_tall) if beside else tall + foot + texts_tall)
    figure.set_size_inches(WIDTH, total)

    def box(x: float, y_top: float, w: float, h: float) -> list[float]:
        return [x / WIDTH, 1 - (y_top + h) / total, w / WIDTH, h / total]

    at = TOP
    figure.text(left / WIDTH, 1 - at / total, head, size=style.HEAD, weight="bold", va="top")
    if sub:
        below = at + 0.21 * (head.count("\n") + 1)
        figure.text(left / WIDTH, 1 - below / total, sub, size=style.TEXT, color=style.SOFT, va="top")
    at += head_tall
    ax = figure.add_axes(box(left, at, wide, tall))
    bar_ax = figure.add_axes(box(left + wide + 0.18, at, 0.16, tall)) if bar else None
    _axes(ax, low, high, axes, unit, wide, tall)
    at += 0.05 if beside else tall + foot
    detail_ax = None
    if detail:
        detail_ax = figure.add_axes(box(left, at + 0.02, 2.1, 2.1))
        figure.text((left + 2.4) / WIDTH, 1 - (at + 0.06) / total, style.wrapped(detail, 3.6, style.TEXT, 8), va="top")
        at += detail_tall
    if made_legend is not None:
        made_legend.set_bbox_to_anchor((text_at / WIDTH, 1 - (at + 0.02) / total), transform=figure.transFigure)
        at += legend_tall
    for text in note_text:
        figure.text(text_at / WIDTH, 1 - (at + 0.04) / total, text, size=style.SMALL, color=style.SOFT, va="top")
        at += 0.145 * (text.count("\n") + 1) + 0.03
    return Page(figure=figure, ax=ax, bar=bar_ax, detail=detail_ax, stretch=stretch)


def _axes(ax, low, high, names, unit: str, wide: float, tall: float) -> None:
    from matplotlib.ticker import MaxNLocator

    if not names[0]:
        ax.set_axis_off()
        ax.set_xlim(low[0], high[0])
        ax.set_ylim(low[1], high[1])
        return
    pad = PAD * np.maximum(high - low, 1e-12) / (np.array([wide, tall]) - 2 * PAD)
    ax.set_xlim(low[0] - pad[0], high[0] + pad[0])
    ax.set_ylim(low[1] - pad[1], high[1] + pad[1])
    ax.set_xlabel(f"{names[0]}, {unit}")
    ax.set_ylabel(f"{names[1]}, {unit}")
    ax.xaxis.set_major_locator(MaxNLocator(max(1, min(8, int(wide / 0.7))), steps=[1, 2, 2.5, 5, 10]))
    ax.yaxis.set_major_locator(MaxNLocator(max(1, min(8, int(tall / 0.45))), steps=[1, 2, 2.5, 5, 10]))
    for side in ("top", "right"):
        ax.spines[side].set_visible(False)
    for axis in (ax.xaxis, ax.yaxis):
        axis.get_major_formatter().set_useOffset(False)


def _legend(figure, legend, room: float):
    """Return the legend, set below the drawing later, and the height it takes."""
    if not legend or not legend[0]:
        return None, 0.0
    handles, labels = legend
    labels = [style.plain(label) for label in labels]
    widest = max(style.text_width(label, style.SMALL) for label in labels) + 0.62
    columns = int(np.clip(room // widest, 1, 4))
    made = figure.legend(
        handles,
        labels,
        loc="upper left",
        bbox_to_anchor=(0.1, 0.5),
        ncols=min(columns, len(labels)),
        handlelength=2.6,
        handleheight=1.3,
        borderpad=0.0,
        borderaxespad=0.0,
        columnspacing=1.4,
        labelspacing=0.55,
        alignment="left",
    )
    tall = made.get_window_extent(figure.canvas.get_renderer()).height / figure.dpi
    return made, tall + 0.14


def colour_bar(page: Page, low: float, high: float, levels: np.ndarray, unit: str = "°C") -> None:
    """Draw the colour bar: the map from lowest to highest in ``unit``, ticks at the isotherms ``levels``, shape (n,)."""
    places = style.decimals(levels) if len(levels) else 2
    axis = page.bar
    ramp = np.linspace(low, high, 256)[:, None] if high > low else np.full((2, 1), low)
    axis.imshow(
        ramp, cmap=style.COLOUR_MAP, aspect="auto", origin="lower", extent=(0, 1, low, max(high, low + 1e-9)),
        vmin=low, vmax=max(high, low + 1e-9),
    )  # fmt: skip
    axis.set_xticks([])
    tall = axis.get_position().height * page.figure.get_size_inches()[1]
    every = max(1, int(np.ceil(len(levels) * 0.15 / tall))) if len(levels) else 1
    ticks = levels[::every] if len(levels) else np.unique([low, high])
    axis.set_yticks(ticks, [style.amount(value, places, unit) for value in ticks])
    axis.yaxis.tick_right()
    axis.tick_params(length=2.5)
    for level in levels:
        shade = (level - low) / (high - low)
        axis.axhline(level, color=style.contrast(shade), linewidth=style.HAIR)


def save(page: Page, folder: Path, name: str, *, vector: bool) -> tuple[str, str | None]:
    """Write the page as PNG, and SVG if asked, atomically; return the file names."""
    import io

    from coldseam.report.files import write_files

    contents = {}
    stream = io.BytesIO()
    page.figure.savefig(
        stream, format="png", dpi=style.DPI, metadata={"Software": "coldseam"}, pil_kwargs={"compress_level": PACKED}
    )
    contents[f"{name}.png"] = stream.getvalue()
    if vector:
        stream = io.BytesIO()
        page.figure.savefig(stream, format="svg", dpi=style.DPI, metadata={"Date": None, "Creator": "coldseam"})
        contents[f"{name}.svg"] = stream.getvalue()
    write_files(folder, contents)
    return f"{name}.png", f"{name}.svg" if vector else None
