"""Fields on the surface of a 2D model along each space's side: temperature and others over the length of the surface."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np

from coldseam.answers.surfacemap import SurfaceMap
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
    title = f"Surface temperature, side of {style.shortened(space)}"
    shown = _Shown(
        values=view.temperature,
        unit=view.shown.unit("temperature"),
        quantity="surface temperature",
        title=title,
        mark="lowest",
    )
    return _draw(view, space, shown, folder, name)


def draw_map(view: View, field: SurfaceMap, folder: Path, name: str) -> Picture | None:
    """Draw a field on the surface that faces a space, along its length; the highest point is marked."""
    title = f"{field.title}, side of {style.shortened(field.space)}"
    quantity = field.title[0].lower() + field.title[1:]
    shown = _Shown(
        values=field.values, unit=field.unit, quantity=quantity, title=title, mark="highest", note=field.note
    )
    return _draw(view, field.space, shown, folder, name)


@dataclass(frozen=True, kw_only=True, eq=False)
class _Shown:
    """A field at the nodes, its unit and name, the chart's title, the extreme that is marked, a note."""

    values: np.ndarray
    unit: str
    quantity: str
    title: str
    mark: str
    note: str = ""


def _draw(view: View, space: str, shown: _Shown, folder: Path, name: str) -> Picture | None:
    strips = _strips(view, space, shown.values)
    if not strips:
        return None
    values = np.concatenate([strip["values"] for strip in strips])
    place = np.concatenate([strip["at"] for strip in strips])
    nodes = np.concatenate([strip["nodes"] for strip in strips])
    ends = {"lowest": int(np.argmin(values)), "highest": int(np.argmax(values))}
    k = ends[shown.mark]
    other = next(end for end in ends if end != shown.mark)
    notes = [f"{shown.mark.capitalize()} {style.amount(values[k], 2, shown.unit)} at {_position(view, nodes[k])}; "
             f"{other} {style.amount(values[ends[other]], 2, shown.unit)}.",
             *([shown.note] if shown.note else []),
             "Length runs along the surface with the solid on the left."]  # fmt: skip
    whole = _pieces(view, space)
    if len(whole) > len(strips):
        notes.append(f"The {len(strips)} longest of {len(whole)} separate pieces of surface are shown.")
    with style.applied():
        made = _chart(view, shown, strips, (float(values.min()), float(values.max())), tuple(notes))
        made.ax.plot(place[k] * 1e3, values[k], "v", color=style.INK, markersize=6, zorder=6)
        _probe_marks(made.ax, view, place, nodes, values)
        file, vector = pages.save(made, folder, name, vector=True)
    alt = f"{shown.title}: {notes[0]}"
    return Picture(file=file, vector=vector, title=shown.title, alt=alt, table=_table(view, shown, strips))


def _position(view: View, node: int) -> str:
    axes = ("r", "z") if view.mesh.axisymmetric else ("x", "y")
    return ", ".join(
        f"{axis} = {style.number(1e3 * c, 4)} {view.shown.unit('length')}"
        for axis, c in zip(axes, view.mesh.points[node], strict=True)
    )


def _table(view: View, shown: _Shown, strips: list[dict]) -> Table:
    rows = []
    for boundary in np.unique(np.concatenate([strip["boundary"] for strip in strips])).tolist():
        values = shown.values[np.unique(view.mesh.facets[view.facet_boundary == boundary])]
        rows.append((view.boundary_names[boundary], float(values.min()), float(values.mean()), float(values.max())))
    return Table(
        columns=("boundary", f"lowest, {shown.unit}", f"mean of nodes, {shown.unit}", f"highest, {shown.unit}"),
        rows=tuple(rows),
    )


def _pieces(view: View, space: str) -> list[np.ndarray]:
    facets = np.flatnonzero(view.faces_space(space))
    return [facets[part] for part in chains(view.mesh.facets[facets])]


def _strips(view: View, space: str, values: np.ndarray) -> list[dict]:
    """Return per piece of surface that has values: nodes, place along the chart (m), values, boundary of each facet."""
    mesh = view.mesh
    found = []
    for facets in _pieces(view, space):
        nodes = np.append(mesh.facets[facets, 0], mesh.facets[facets[-1], 1])
        length = np.append(0, np.cumsum(np.linalg.norm(np.diff(mesh.points[nodes], axis=0), axis=1)))
        if np.isfinite(values[nodes]).all():
            found.append({"nodes": nodes, "at": length, "values": values[nodes],
                          "boundary": view.facet_boundary[facets]})  # fmt: skip
    found = sorted(found, key=lambda strip: -strip["at"][-1])[:MOST_PATHS]
    gap = 0.04 * sum(strip["at"][-1] for strip in found)
    start = 0.0
    for strip in found:
        strip["at"] = strip["at"] + start
        start = strip["at"][-1] + gap
    return found


def _chart(view: View, shown: _Shown, strips: list[dict], span: tuple[float, float], notes: tuple[str, ...]):
    from matplotlib.lines import Line2D

    used = np.unique(np.concatenate([strip["boundary"] for strip in strips])).tolist()
    handles, labels = [], []
    for k in used:
        colour, dash = style.boundary_line(k, view.boundary_kind[k])
        handles.append(Line2D([], [], color=colour, linestyle=dash, linewidth=1.6))
        labels.append(style.shortened(view.boundary_names[k]))
    probes = bool(view.probes)
    handles.append(Line2D([], [], color=style.INK, marker="v", markersize=6, linestyle="none"))
    labels.append(shown.mark)
    if probes:
        handles.append(Line2D([], [], color=style.INK, marker="+", markersize=7, linestyle="none"))
        labels.append("probe on the surface")
    made = pages.open_page(
        np.array([0.0, 0.0]), np.array([2.3, 1.0]), heading=shown.title, title=view.title, axes=("length", shown.unit),
        legend=(handles, labels), notes=notes,
    )  # fmt: skip
    ax = made.ax
    for strip in strips:
        for first, last, k in _runs(strip["boundary"]):
            colour, dash = style.boundary_line(k, view.boundary_kind[k])
            part = slice(first, last + 1)
            ax.plot(strip["at"][part] * 1e3, strip["values"][part], color=colour, linestyle=dash, linewidth=1.6)
    end = strips[-1]["at"][-1] * 1e3
    ax.set_xlim(-0.05 * end, 1.05 * end)
    room = max(span[1] - span[0], 0.1)
    ax.set_ylim(span[0] - 0.12 * room, span[1] + 0.12 * room)
    ax.set_xlabel(f"length along the surface, {view.shown.unit('length')}")
    ax.set_ylabel(f"{shown.quantity}, {shown.unit}")
    ax.grid(True, color=style.FAINT, linewidth=style.HAIR)
    return made


def _runs(boundary: np.ndarray) -> list[tuple[int, int, int]]:
    """Return first facet, end (exclusive) and boundary of every run along a path."""
    splits = np.flatnonzero(np.diff(boundary)) + 1
    starts, ends = np.append(0, splits), np.append(splits, len(boundary))
    return list(zip(starts.tolist(), ends.tolist(), boundary[starts].tolist(), strict=True))


def _probe_marks(ax, view: View, place, nodes, values) -> None:
    from coldseam.report.labels import Wanted, set_labels

    points = view.mesh.points[nodes]
    wanted = []
    for name, at in view.probes.items():
        distance = np.linalg.norm(points - np.asarray(at, dtype=float)[:2], axis=1)
        k = int(np.argmin(distance))
        if distance[k] > 1e-3 * view.mesh.size:
            continue
        x, y = place[k] * 1e3, values[k]
        ax.plot(x, y, "+", color=style.INK, markersize=8, markeredgewidth=1.3, zorder=7)
        tall, wide = np.diff(ax.get_ylim())[0], np.diff(ax.get_xlim())[0]
        text = style.shortened(name, 24)
        aside = (style.text_width(text, style.SMALL) / 2 + 0.1) / WIDE * wide * np.array([-1.0, 0.0, 1.0])
        up = tall * np.array([0.06, -0.06, 0.09, -0.09, 0.13, -0.13])
        spots = np.stack([g.ravel() for g in np.meshgrid(x + aside, y + up)], axis=1)
        wanted.append(Wanted(text=text, points=spots))
    set_labels(ax, wanted)
