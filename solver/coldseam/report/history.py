"""The pictures of a run over time: temperatures and heat flows against time, with schedules, levels and limits."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from coldseam.report import style
from coldseam.report.files import csv_text
from coldseam.report.view import Picture, Table, View

MOST_LINES = 12
MOST_POINTS = 40
BLOCK = 10_000  # rows written at a time
SCALES = ((3 * 86400.0, "d", 86400.0), (2 * 3600.0, "h", 3600.0), (300.0, "min", 60.0), (0.0, "s", 1.0))


@dataclass(frozen=True, kw_only=True, eq=False)
class HistoryView:
    """A recorded run as the report sees it.

    Parameters
    ----------
    columns
        Kind, name and unit of every column; the first is time.
    headings
        As in history.csv.
    rows
        (n_rows, n_columns).
    levels
        Lines across the temperatures: what they are and °C; the picture adds the value.
    bounds
        Lines across the heat flows: label and W.
    moments
        Lines down: label and s.
    given
        Spaces whose temperature is given and not computed.
    """

    columns: tuple[tuple[str, str, str], ...]
    headings: tuple[str, ...]
    rows: np.ndarray
    levels: tuple[tuple[str, float], ...] = ()
    bounds: tuple[tuple[str, float], ...] = ()
    moments: tuple[tuple[str, float], ...] = ()
    given: tuple[str, ...] = ()


def history_csv(history: HistoryView) -> Iterator[bytes]:
    """Yield history.csv in blocks: times in s, temperatures in °C, places in mm, flows in W (a cross-section: W/m)."""
    yield csv_text(list(history.headings), []).encode()
    for start in range(0, len(history.rows), BLOCK):
        _, _, text = csv_text([""], history.rows[start : start + BLOCK].tolist()).partition("\n")
        yield text.encode()


def scale_of(duration: float) -> tuple[str, float]:
    """Return the unit in which a duration (s) is best read, and its seconds.

    >>> scale_of(7200.0), scale_of(30.0)
    (('h', 3600.0), ('s', 1.0))
    """
    return next((unit, seconds) for least, unit, seconds in SCALES if duration >= least)


def draw_temperatures(view: View, folder: Path, name: str) -> Picture:
    """Draw spaces, goods, probes and the extremes of surfaces against time."""
    history = view.history
    kinds = ["space", "goods", "probe"]
    if not any(kind in ("goods", "probe") and unit == "degC" for kind, _, unit in history.columns):
        kinds += ["min", "max"]
    chosen = [n for n, (kind, _, unit) in enumerate(history.columns) if kind in kinds and unit == "degC"][:MOST_LINES]
    lines = [
        (_label(history, n), n, history.columns[n][1] in history.given and history.columns[n][0] == "space")
        for n in chosen
    ]
    return _chart(view, folder, name, "Temperatures over time", "temperature", lines, history.levels)


def draw_flows(view: View, folder: Path, name: str) -> Picture | None:
    """Draw heat flows of boundaries and machines against time; None where all of them are 0."""
    history = view.history
    kinds = ("boundary", "gain", "cooling", "air_exchange", "latent", "from_goods", "power")
    chosen = [
        n
        for n, (kind, _, unit) in enumerate(history.columns)
        if kind in kinds and unit in ("W", "W/m") and np.any(history.rows[:, n])
    ]
    if not chosen:
        return None
    lines = [(_label(history, n), n, False) for n in chosen[:MOST_LINES]]
    return _chart(
        view,
        folder,
        name,
        "Heat flows over time",
        "flow",
        lines,
        history.bounds,
    )


def _label(history: HistoryView, n: int) -> str:
    kind, name, _ = history.columns[n]
    words = {"space": "", "goods": "", "probe": "", "min": "coldest of ", "max": "warmest of ", "boundary": "through "}
    return f"{words[kind]}{name}" if kind in words else f"{name}: {kind.replace('_', ' ')}"


def _chart(view: View, folder: Path, name: str, title: str, quantity: str, lines, levels) -> Picture:
    import matplotlib

    matplotlib.use("Agg")
    from matplotlib.figure import Figure

    history, measured = view.history, view.shown.unit(quantity)
    label = (
        f"temperature, {measured}"
        if quantity == "temperature"
        else f"heat flow, {measured}\n(into the solid, or into the space)"
    )
    values = view.shown.value(quantity, history.rows)
    unit, seconds = scale_of(float(history.rows[-1, 0]))
    time = history.rows[:, 0] / seconds
    with style.applied():
        figure = Figure(figsize=(8.2, 4.8), layout="constrained")
        ax = figure.add_subplot()
        ends = []
        for order, (text, n, given) in enumerate(lines):
            colour = style.LINES[order % len(style.LINES)]
            dash = (0, (1, 1)) if given else style.DASHES[(order // len(style.LINES)) % 4]
            ax.plot(
                time,
                values[:, n],
                color=colour,
                linestyle=dash,
                linewidth=1.5,
                label=style.shortened(text + (" (given)" if given else ""), 40),
            )
            ends.append(float(values[-1, n]))
        for text, value in [(text, view.shown.value(quantity, value)) for text, value in levels]:
            ax.axhline(value, color=style.SOFT, linestyle=(0, (6, 3)), linewidth=style.THIN)
            ax.annotate(
                f"{style.shortened(text, 40)}: {style.number(value)} {measured}",
                (time[-1], value),
                ha="right",
                va="bottom",
                fontsize=style.SMALL,
                color=style.SOFT,
                path_effects=style.halo(),
            )
        for text, moment in history.moments:
            ax.axvline(moment / seconds, color=style.INK, linestyle=(0, (1, 2)), linewidth=style.THIN)
            ax.annotate(
                style.shortened(text, 40), (moment / seconds, 0.02), xycoords=("data", "axes fraction"),
                rotation=90, ha="right",
                va="bottom", fontsize=style.SMALL, path_effects=style.halo(),
            )  # fmt: skip
        ax.set_xlim(time[0], time[-1] if time[-1] > time[0] else time[0] + 1.0)
        ax.set_xlabel(f"time, {unit}")
        ax.set_ylabel(label)
        ax.grid(True, color=style.FAINT, linewidth=style.HAIR)
        sub = style.wrapped(view.title, 6.0, style.TEXT, 2)
        ax.set_title(title, loc="left", fontsize=style.HEAD, weight="bold", pad=8 + 12 * (sub.count("\n") + 1))
        ax.annotate(sub, (0, 1), xytext=(0, 6), xycoords="axes fraction", textcoords="offset points", va="bottom",
                    color=style.SOFT)  # fmt: skip
        ax.legend(loc="upper left", bbox_to_anchor=(1.01, 1.0), borderaxespad=0.0)
        for ending in ("png", "svg"):
            figure.savefig(
                folder / f"{name}.{ending}",
                dpi=style.DPI,
                metadata={"Software": "coldseam"} if ending == "png" else {"Date": None, "Creator": "coldseam"},
            )
    pick = np.unique(np.linspace(0, len(time) - 1, MOST_POINTS).astype(int))
    table = Table(
        columns=(f"time, {unit}", *(f"{text}, {measured}" for text, _, _ in lines)),
        rows=tuple((float(time[k]), *(float(values[k, n]) for _, n, _ in lines)) for k in pick),
    )
    told = "; ".join(f"{text} ends at {value:.4g} {measured}" for (text, _, _), value in zip(lines, ends, strict=True))
    return Picture(
        file=f"{name}.png", vector=f"{name}.svg", title=title, alt=f"{title} of {view.title}: {told}", table=table
    )
