"""Surface temperature of a 2D model along each space's side: temperature over the length of the surface."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from coldseam.report import page as pages
from coldseam.report import style
from coldseam.report.plane import chains
from coldseam.report.view import Picture, Table, View

MOST_PATHS = 8
WIDE = 6.5
"""Width of the chart, inches, about."""


def draw_surface(view: View, space: str, folder: Path, name: str) -> Picture | None:
    """Draw the temperature of the surface that faces a space, along its length; None if it has none.

    Pieces of surface that do not touch stand one after another with a gap. The lowest point is
    marked, probes that lie on the surface too.
    """
    strips = _strips(view, space)
    if not strips:
        return None
    title = f"Surface temperature, side of {style.shortened(space)}"
    temperature = np.concatenate([strip["temperature"] for strip in strips])
    place = np.concatenate([strip["at"] for strip in strips])
    nodes = np.concatenate([strip["nodes"] for strip in strips])
    k = int(np.argmin(temperature))
    low, high = float(temperature.min()), float(temperature.max())
    axes = ("r", "z") if view.mesh.axisymmetric else ("x", "y")
    position = ", ".join(f"{axis} = {style.number(1e3 * c, 4)} mm"
                         for axis, c in zip(axes, view.mesh.points[nodes[k]], strict=True))  # fmt: skip
    notes = [f"Lowest {style.degrees(low, 2)} at {position}; highest {style.degrees(high, 2)}.",
             "Length runs along the surface with the solid on the left."]  # fmt: skip
    whole = _pieces(view, space)
    if len(whole) > len(strips):
        notes.append(f"The {len(strips)} longest of {len(whole)} separate pieces of surface are shown.")
    with style.applied():
        made = _chart(view, title, strips, (low, high), tuple(notes))
        made.ax.plot(place[k] * 1e3, low, "v", color=style.INK, markersize=6, zorder=6)
        _probe_marks(made.ax, view, place, nodes, temperature)
        file, vector = pages.save(made, folder, name, vector=True)
    rows = []
    for boundary in np.unique(np.concatenate([strip["boundary"] for strip in strips])).tolist():
        values = view.temperature[np.unique(view.mesh.facets[view.facet_boundary == boundary])]
        rows.append((view.boundary_names[boundary], float(values.min()), float(values.mean()), float(values.max())))
    table = Table(columns=("boundary", "lowest, °C", "mean of nodes, °C", "highest, °C"), rows=tuple(rows))
    alt = f"{title}: {notes[0]}"
    return Picture(file=file, vector=vector, title=title, alt=alt, table=table)


def _pieces(view: View, space: str) -> list[np.ndarray]:
    facets = np.flatnonzero(view.faces_space(space))
    return [facets[part] for part in chains(view.mesh.facets[facets])]


def _strips(view: View, space: str) -> list[dict]:
    """Return per piece of surface: nodes, place along the chart (m), temperature, boundary of each facet."""
    mesh = view.mesh
    found = []
    for facets in _pieces(view, space):
        nodes = np.append(mesh.facets[facets, 0], mesh.facets[facets[-1], 1])
        length = np.append(0, np.cumsum(np.linalg.norm(np.diff(mesh.points[nodes], axis=0), axis=1)))
        found.append({"nodes": nodes, "at": length, "temperature": view.temperature[nodes],
                      "boundary": view.facet_boundary[facets]})  # fmt: skip
    found = sorted(found, key=lambda strip: -strip["at"][-1])[:MOST_PATHS]
    gap = 0.04 * sum(strip["at"][-1] for strip in found)
    start = 0.0
    for strip in found:
        strip["at"] = strip["at"] + start
        start = strip["at"][-1] + gap
    return found


def _chart(view: View, title: str, strips: list[dict], span: tuple[float, float], notes: tuple[str, ...]):
    from matplotlib.lines import Line2D

    used = np.unique(np.concatenate([strip["boundary"] for strip in strips])).tolist()
    handles, labels = [], []
    for k in used:
        colour, dash = style.boundary_line(k, view.boundary_kind[k])
        handles.append(Line2D([], [], color=colour, linestyle=dash, linewidth=1.6))
        labels.append(style.shortened(view.boundary_names[k]))
    probes = bool(view.probes)
    handles.append(Line2D([], [], color=style.INK, marker="v", markersize=6, linestyle="none"))
    labels.append("lowest")
    if probes:
        handles.append(Line2D([], [], color=style.INK, marker="+", markersize=7, linestyle="none"))
        labels.append("probe on the surface")
    made = pages.open_page(
        np.array([0.0, 0.0]), np.array([2.3, 1.0]), heading=title, title=view.title, axes=("length", "T"),
        legend=(handles, labels), notes=notes,
    )  # fmt: skip
    ax = made.ax
    for strip in strips:
        for first, last, k in _runs(strip["boundary"]):
            colour, dash = style.boundary_line(k, view.boundary_kind[k])
            part = slice(first, last + 1)
            ax.plot(strip["at"][part] * 1e3, strip["temperature"][part], color=colour, linestyle=dash, linewidth=1.6)
    end = strips[-1]["at"][-1] * 1e3
    ax.set_xlim(-0.05 * end, 1.05 * end)
    room = max(span[1] - span[0], 0.1)
    ax.set_ylim(span[0] - 0.12 * room, span[1] + 0.12 * room)
    ax.set_xlabel("length along the surface, mm")
    ax.set_ylabel("surface temperature, °C")
    ax.grid(True, color=style.FAINT, linewidth=style.HAIR)
    return made


def _runs(boundary: np.ndarray) -> list[tuple[int, int, int]]:
    """Return first facet, end (exclusive) and boundary of every run along a path."""
    splits = np.flatnonzero(np.diff(boundary)) + 1
    starts, ends = np.append(0, splits), np.append(splits, len(boundary))
    return list(zip(starts.tolist(), ends.tolist(), boundary[starts].tolist(), strict=True))


def _probe_marks(ax, view: View, place, nodes, temperature) -> None:
    from coldseam.report.labels import Wanted, set_labels

    points = view.mesh.points[nodes]
    wanted = []
    for name, at in view.probes.items():
        distance = np.linalg.norm(points - np.asarray(at, dtype=float)[:2], axis=1)
        k = int(np.argmin(distance))
        if distance[k] > 1e-3 * view.mesh.size:
            continue
        x, y = place[k] * 1e3, temperature[k]
        ax.plot(x, y, "+", color=style.INK, markersize=8, markeredgewidth=1.3, zorder=7)
        tall, wide = np.diff(ax.get_ylim())[0], np.diff(ax.get_xlim())[0]
        text = style.shortened(name, 24)
        aside = (style.text_width(text, style.SMALL) / 2 + 0.1) / WIDE * wide * np.array([-1.0, 0.0, 1.0])
        up = tall * np.array([0.06, -0.06, 0.09, -0.09, 0.13, -0.13])
        spots = np.stack([g.ravel() for g in np.meshgrid(x + aside, y + up)], axis=1)
        wanted.append(Wanted(text=text, points=spots))
    set_labels(ax, wanted)
