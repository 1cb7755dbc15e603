"""Pictures of plane sections: the model, its temperature, the lines along which heat flows.

A 2D or axisymmetric model is one section; a 3D model is cut (:mod:`coldseam.report.pictures3d`)
and its sections are drawn here too, so that all look alike. Positions are drawn in mm, or what the view's units say.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np

from coldseam.report import page as pages
from coldseam.report import style
from coldseam.report.labels import Wanted, boxes, set_labels
from coldseam.report.plane import Section, chain, isolines, outline_edges, thicknesses
from coldseam.report.view import Picture, Table, View, boundary_areas

EVEN = 0.02
"""Part of the whole model's temperature range below which a section counts as even."""
THINNEST = 2e-4
"""Least height of a triangle that is shaded, as a part of the picture."""
SHADES, MOST_SHADED = 24, 20_000
"""A triangle that spans more than one of so many steps of the scale is quartered before it is shaded, while they are few."""
MOST_NAMES = 24
"""Names in a legend; the table beside the picture has all."""


def draw_model(view: View, section: Section, folder: Path, name: str, title: str = "Model") -> Picture:
    """Draw the bodies of a section and, in a 2D model, its boundaries, each with name and area."""
    plane_model = view.mesh.dim == 2
    handles, labels = _body_legend(view, section)
    if plane_model:
        more, texts = _boundary_legend(view)
        handles, labels = handles + more, labels + texts
    with style.applied():
        close_up = _close_up(view, section)
        made = _open(section, view, title, legend=(handles, labels), detail=close_up and close_up[2])
        _fill_bodies(made.ax, view, section)
        if plane_model:
            tags = _draw_boundaries(made.ax, view, tagged=True)
            _draw_probes(made.ax, view, tags)
        if close_up:
            _draw_close_up(made, view, section, close_up)
        file, vector = pages.save(made, folder, name, vector=plane_model)
    bodies = ", ".join(style.plain(view.mesh.bodies[k].name) for k in np.unique(section.cell_body))
    alt = f"{title}{_where(section)}. Bodies: {bodies}."
    if plane_model:
        alt += f" Boundaries: {', '.join(map(style.plain, view.boundary_names))}."
    return Picture(file=file, vector=vector, title=title + _where(section), alt=alt, table=model_table(view))


def draw_temperature(view: View, section: Section, folder: Path, name: str, title: str = "Temperature") -> Picture:
    """Draw the temperature of a section with isotherms at round values."""
    low, high = float(section.temperature.min()), float(section.temperature.max())
    coldest, warmest = float(view.temperature.min()), float(view.temperature.max())
    even = high - low < EVEN * (warmest - coldest)  # isotherms would trace the mesh; the scale is the whole model's
    levels = np.empty(0) if even else style.round_levels(*(view.scale or (low, high)))
    places, unit = style.decimals(levels) if len(levels) else 2, view.shown.unit("temperature")
    read = (f"From {style.amount(low, max(1, places), unit)} to {style.amount(high, max(1, places), unit)} in this section"
            f"{'' if len(levels) else '; too even for isotherms'}.",)  # fmt: skip
    low, high = view.scale or ((coldest, warmest) if even else (low, high))
    with style.applied():
        made = _open(section, view, title, bar=True, notes=read + _thin_note(view, section))
        _shade(made.ax, section, low, high)
        _outlines(made.ax, section)
        wanted = []
        for level in levels:
            segments, _ = isolines(section.points * 1e3, section.cells, section.temperature, level)
            _lines(made.ax, segments, style.contrast((level - low) / (high - low)), style.THIN)
            wanted.append(Wanted(text=style.amount(level, places, unit), points=segments.mean(axis=1)))
        set_labels(made.ax, wanted, spare_small=True)
        pages.colour_bar(made, low, high, levels, unit)
        file, vector = pages.save(made, folder, name, vector=view.mesh.dim == 2)
    alt = f"{title}{_where(section)}. {read[0]} "
    alt += f"Isotherms at {', '.join(style.amount(v, places, unit) for v in levels) or 'no value'}."
    return Picture(file=file, vector=vector, title=title + _where(section), alt=alt, table=temperature_table(view))


def draw_heat_flow(view: View, section: Section, folder: Path, name: str, title: str = "Heat flow lines") -> Picture:
    """Draw the lines along which heat flows, with arrows; in 2D the same heat runs between neighbours."""
    from coldseam.report.flow import flow_lines

    flow = flow_lines(view, section)
    handles, labels = _body_legend(view, section)
    notes = (flow.note,) + _thin_note(view, section)
    with style.applied():
        made = _open(section, view, title, legend=(handles, labels), notes=notes)
        _fill_bodies(made.ax, view, section, hatched=False)
        low, high = float(section.temperature.min()), float(section.temperature.max())
        for level in style.round_levels(low, high):
            segments, _ = isolines(section.points * 1e3, section.cells, section.temperature, level)
            _lines(made.ax, segments, "#8f98a3", style.HAIR)
        _lines(made.ax, flow.segments, "#12457a", 1.0)
        _arrows(made, flow)
        file, vector = pages.save(made, folder, name, vector=view.mesh.dim == 2)
    entries = view.answers.get("boundaries", {})
    rows = tuple((key, _value(view, "flow", entry.get("heat_flow"))) for key, entry in entries.items())
    table = Table(columns=("boundary", f"heat flow into the solid, {view.shown.unit('flow')}"), rows=rows)
    return Picture(file=file, vector=vector, title=title + _where(section), alt=f"{title}. {flow.note}", table=table)


def model_table(view: View) -> Table:
    """Return name, kind, space and area of every boundary."""
    areas = view.shown.value("area", boundary_areas(view)).tolist()
    kinds = [kind.replace("_", " ") for kind in view.boundary_kind]
    rows = zip(view.boundary_names, kinds, view.boundary_space, areas, strict=True)
    return Table(columns=("boundary", "kind", "space", f"area, {view.shown.unit('area')}"), rows=tuple(rows))


def temperature_table(view: View) -> Table:
    """Return the lowest, mean and highest surface temperature of every boundary."""
    rows = []
    for name, entry in view.answers.get("boundaries", {}).items():
        surface = entry.get("temperature") or {}
        rows.append((name, *(_value(view, "temperature", surface.get(key)) for key in ("min", "mean", "max"))))
    unit = view.shown.unit("temperature")
    return Table(columns=("boundary", f"lowest, {unit}", f"mean, {unit}", f"highest, {unit}"), rows=tuple(rows))


def _value(view: View, quantity: str, value: float | None) -> float | None:
    return None if value is None else view.shown.value(quantity, value)


# ---------------------------------------------------------------------------------------- parts


def _where(section: Section) -> str:
    return f", section {section.where}" if section.where else ""


def _open(section: Section, view: View, title: str, *, bar=False, detail=None, legend=None, notes=()):
    points = section.points * 1e3
    low, high = points.min(axis=0), points.max(axis=0)
    spare = pages.stretch_note(pages.stretch_for(*(high - low)), section.axes)
    return pages.open_page(
        low, high, heading=title + _where(section), title=view.title, axes=section.axes, bar=bar, detail=detail,
        unit=view.shown.unit("length"), legend=legend, notes=((spare,) if spare else ()) + tuple(notes),
    )  # fmt: skip


def _body_legend(view: View, section: Section) -> tuple[list, list[str]]:
    from matplotlib.patches import Patch

    present = np.unique(section.cell_body)
    handles, labels = [], []
    for body in present[:MOST_NAMES].tolist():
        tint, hatch = style.body_fill(body)
        handles.append(Patch(facecolor=tint, hatch=hatch, edgecolor=style.SOFT, linewidth=style.HAIR))
        labels.append(style.shortened(view.mesh.bodies[body].name))
    return _counted(handles, labels, len(present), "bodies")


def _boundary_legend(view: View) -> tuple[list, list[str]]:
    from matplotlib.lines import Line2D

    areas = boundary_areas(view)
    handles, labels = [], []
    for k, name in enumerate(view.boundary_names[:MOST_NAMES]):
        colour, dash = style.boundary_line(k, view.boundary_kind[k])
        handles.append(Line2D([], [], color=colour, linestyle=dash, linewidth=style.BOLD))
        area = style.area_text(areas[k], view.shown)
        labels.append(f"{k + 1}  {style.shortened(name, 32)}, {area}")
    return _counted(handles, labels, len(view.boundary_names), "boundaries")


def _counted(handles: list, labels: list[str], total: int, what: str) -> tuple[list, list[str]]:
    from matplotlib.lines import Line2D

    if total > MOST_NAMES:
        handles.append(Line2D([], [], linestyle="none"))
        labels.append(f"and {total - MOST_NAMES} more {what}, see the table")
    return handles, labels


def _fill_bodies(ax, view: View, section: Section, *, hatched: bool = True) -> None:
    from matplotlib.patches import PathPatch

    edges, group = outline_edges(section.cells, section.cell_body)
    for body in np.unique(section.cell_body).tolist():
        tint, hatch = style.body_fill(body)
        outline = _outline_path(section.points * 1e3, edges[group == body])
        ax.add_patch(PathPatch(outline, facecolor=tint, edgecolor=tint, linewidth=1.2, zorder=1))
        look = {"hatch": hatch} if hatched and hatch else {}
        ax.add_patch(PathPatch(outline, facecolor="none", edgecolor=style.SOFT, linewidth=style.HAIR, zorder=2, **look))


def _outline_path(points: np.ndarray, edges: np.ndarray):
    """Return closed outlines as one path; those of holes run the other way and stay open to what is behind."""
    from matplotlib.path import Path as Outline

    order, part = chain(edges)
    ordered = edges[order]
    starts = np.append(True, part[1:] != part[:-1])
    ends = np.append(starts[1:], True)
    # per closed path: MOVETO, LINETO ..., CLOSEPOLY
    place = np.arange(len(ordered)) + np.cumsum(starts) - 1
    vertices = np.empty((len(ordered) + int(starts.sum()), 2))
    codes = np.full(len(vertices), Outline.LINETO, dtype=Outline.code_type)
    vertices[place] = points[ordered[:, 0]]
    codes[place[starts]] = Outline.MOVETO
    vertices[place[ends] + 1] = points[ordered[ends, 1]]
    codes[place[ends] + 1] = Outline.CLOSEPOLY
    return Outline(vertices, codes)


def _draw_boundaries(ax, view: View, *, tagged: bool) -> list:
    from matplotlib.collections import LineCollection

    points = view.mesh.points * 1e3
    wanted = []
    for k in range(len(view.boundary_names)):
        facets = view.mesh.facets[view.facet_boundary == k]
        if len(facets) == 0:
            continue
        colour, dash = style.boundary_line(k, view.boundary_kind[k])
        order, part = chain(facets)
        ordered = facets[order]
        splits = np.flatnonzero(np.diff(part)) + 1
        lines = [points[np.append(piece[:, 0], piece[-1, 1])] for piece in np.split(ordered, splits)]
        ax.add_collection(LineCollection(lines, colors=colour, linestyles=[dash], linewidths=style.BOLD, zorder=4,
                                         capstyle="butt"), autolim=False)  # fmt: skip
        longest = max(lines, key=lambda line: float(np.linalg.norm(np.diff(line, axis=0), axis=1).sum()))
        wanted.append(Wanted(text=str(k + 1), points=_along(longest)))
    return set_labels(ax, wanted, boxed=True) if tagged else []


def _along(line: np.ndarray) -> np.ndarray:
    """Return points spread evenly over the middle of a path."""
    length = np.append(0, np.cumsum(np.linalg.norm(np.diff(line, axis=0), axis=1)))
    at = np.linspace(0.1, 0.9, 81) * length[-1]
    return np.stack([np.interp(at, length, line[:, 0]), np.interp(at, length, line[:, 1])], axis=1)


def _draw_probes(ax, view: View, tags: list) -> None:
    wanted = []
    for name, at in view.probes.items():
        x, y = np.asarray(at, dtype=float)[:2] * 1e3
        ax.plot(x, y, marker="+", markersize=7, color=style.INK, markeredgewidth=1.2, zorder=8, linestyle="none")
        gap = np.array([_data_length(ax, 0, 0.12), _data_length(ax, 1, 0.12)])
        ring = np.linspace(0, 2 * np.pi, 24, endpoint=False)
        text = style.shortened(name, 24)
        reach = np.array([_data_length(ax, 0, style.text_width(text, style.SMALL) / 2 + 0.10), gap[1]])
        around = np.stack([x + reach[0] * np.cos(ring), y + reach[1] * 1.4 * np.sin(ring)], axis=1)
        wanted.append(Wanted(text=text, points=around))
    edges = view.mesh.points[view.mesh.facets] * 1e3
    share = np.linspace(0.0, 1.0, 9)[:, None, None]
    lines = (edges[:, 0] + share * (edges[:, 1] - edges[:, 0])).reshape(-1, 2)
    set_labels(ax, wanted, avoid=boxes(tags), lines=lines)


def _data_length(ax, direction: int, inches: float) -> float:
    """Return how long ``inches`` on the page are along a data axis."""
    frame = ax.get_window_extent()
    limits = ax.get_xlim() if direction == 0 else ax.get_ylim()
    pixels = frame.width if direction == 0 else frame.height
    return (limits[1] - limits[0]) * inches * ax.figure.dpi / pixels


def _shade(ax, section: Section, low: float, high: float) -> None:
    from matplotlib.tri import Triangulation

    points = section.points * 1e3
    cells = _wide_enough(points, section.cells)
    corner, values = _evenly_shaded(points[cells], section.temperature[cells], (high - low) / SHADES)
    field = Triangulation(*corner.reshape(-1, 2).T, np.arange(3 * len(corner)).reshape(-1, 3))
    ax.tripcolor(field, values.ravel(), shading="gouraud", cmap=style.COLOUR_MAP, vmin=low,
                 vmax=max(high, low + 1e-9), rasterized=True, zorder=1)  # fmt: skip


def _evenly_shaded(corner: np.ndarray, values: np.ndarray, most: float) -> tuple[np.ndarray, np.ndarray]:
    """Return triangles (n, 3, 2) and their values (n, 3) with those quartered that span more than ``most``.

    Colours between corners are mixed from theirs, which over a large step are not those of the map.
    """
    for _ in range(3):
        wide = np.ptp(values, axis=1) > most
        if not wide.any() or len(values) > MOST_SHADED:
            break
        parts = [_quartered(corner[wide]), _quartered(values[wide][:, :, None])[..., 0]]
        corner, values = np.concatenate([corner[~wide], parts[0]]), np.concatenate([values[~wide], parts[1]])
    return corner, values


def _quartered(corner: np.ndarray) -> np.ndarray:
    middle = 0.5 * (corner + np.roll(corner, -1, axis=1))  # of the sides 01, 12, 20
    a, b, c = corner[:, 0], corner[:, 1], corner[:, 2]
    p, q, r = middle[:, 0], middle[:, 1], middle[:, 2]
    return np.concatenate([np.stack(part, axis=1) for part in ((a, p, r), (p, b, q), (r, q, c), (p, q, r))])


def _wide_enough(points: np.ndarray, cells: np.ndarray) -> np.ndarray:
    """Return the triangles without those thinner than a small part of a pixel, whose shades are drawn as streaks."""
    corner = points[cells]
    u, v = corner[:, 1] - corner[:, 0], corner[:, 2] - corner[:, 0]
    longest = np.max(np.linalg.norm(np.stack([u, v, v - u]), axis=2), axis=0)
    height = np.abs(u[:, 0] * v[:, 1] - u[:, 1] * v[:, 0]) / np.maximum(longest, 1e-300)
    return cells[height > THINNEST * float(np.ptp(points, axis=0).max())]


def _outlines(ax, section: Section) -> None:
    edges, _ = outline_edges(section.cells, section.cell_body)
    _lines(ax, section.points[edges] * 1e3, style.PAPER, 1.3, zorder=2)
    _lines(ax, section.points[edges] * 1e3, style.INK, style.HAIR, zorder=3)


def _lines(ax, segments: np.ndarray, colour: str, width: float, zorder: float = 3.5) -> None:
    from matplotlib.collections import LineCollection

    ax.add_collection(
        LineCollection(segments, colors=colour, linewidths=width, zorder=zorder, capstyle="round"), autolim=False
    )


def _arrows(made: pages.Page, flow) -> None:
    """Draw an arrowhead on flow lines wherever there is room for one."""
    if len(flow.segments) == 0:
        return
    middle = flow.segments.mean(axis=1)
    pixel = made.ax.transData.transform(middle)
    cell = np.floor(pixel / (0.42 * made.figure.dpi)).astype(np.int64)
    inside = pixel - (cell + 0.5) * (0.42 * made.figure.dpi)
    order = np.argsort((inside**2).sum(axis=1))  # the point nearest the middle of every square of a raster
    _, first = np.unique(cell[order], axis=0, return_index=True)
    chosen = order[first]
    along = made.ax.transData.transform(middle[chosen] + flow.direction[chosen] * 1e-6) - pixel[chosen]
    turn = np.degrees(np.arctan2(along[:, 1], along[:, 0]))
    from matplotlib.markers import MarkerStyle
    from matplotlib.transforms import Affine2D

    for angle in np.unique(np.round(turn / 6) * 6):  # one marker style per 6°
        here = chosen[np.round(turn / 6) * 6 == angle]
        head = MarkerStyle([(-1, -0.62), (1, 0), (-1, 0.62), (-0.5, 0), (-1, -0.62)],
                           transform=Affine2D().rotate_deg(angle))  # fmt: skip
        made.ax.scatter(*middle[here].T, marker=head, s=26, color="#12457a", linewidths=0, zorder=5)


# ------------------------------------------------------------------------------------ thin parts


def _drawn_scale(section: Section) -> float:
    """Return the smaller of the two drawing scales, inches per m."""
    span = np.ptp(section.points, axis=0)
    shown = span * np.array(pages.stretch_for(*span))
    return float(min(5.5 / shown[0], pages.TALLEST / shown[1]) * min(pages.stretch_for(*span)))


def _thin_bodies(view: View, section: Section) -> list[tuple[int, float]]:
    """Return the bodies that would be drawn thinner than a fine line, and their thickness, m."""
    thick = thicknesses(section, len(view.mesh.bodies))
    stretch = max(pages.stretch_for(*np.ptp(section.points, axis=0)))
    visible = thick * _drawn_scale(section) * stretch * 72
    return [(int(k), float(thick[k])) for k in np.flatnonzero(visible < 1.2)]


def _thin_note(view: View, section: Section) -> tuple[str, ...]:
    thin = _thin_bodies(view, section)
    if not thin:
        return ()
    unit = view.shown.unit("length")
    names = ", ".join(f"{style.shortened(view.mesh.bodies[k].name, 30)} ({t * 1e3:.2g} {unit})" for k, t in thin[:4])
    more = f" and {len(thin) - 4} more" if len(thin) > 4 else ""
    return (f"Thinner than the line that shows it: {names}{more}.",)


def _close_up(view: View, section: Section) -> tuple[np.ndarray, np.ndarray, str] | None:
    """Return corners (m) and caption of a close-up of the thinnest body, if it is too thin to see."""
    thin = _thin_bodies(view, section)
    if not thin:
        return None
    body, thick = min(thin, key=lambda entry: entry[1])
    edges, group = outline_edges(section.cells, section.cell_body)
    place = section.points[edges[group == body]].mean(axis=1)
    # the place with most bodies near it, so that the close-up shows how they meet
    half = 10 * thick
    from scipy.spatial import cKDTree

    near = place[np.linspace(0, len(place) - 1, min(len(place), 200)).astype(int)]
    others = section.points[edges].mean(axis=1)
    found = cKDTree(others).query_ball_point(near, half)
    variety = [len(np.unique(group[rows])) if len(rows) else 0 for rows in found]
    centre = near[int(np.argmax(variety))]
    # mostly solid in view: the close-up may reach beyond the model by a quarter of its width only
    lowest, highest = section.points.min(axis=0) + 0.5 * half, section.points.max(axis=0) - 0.5 * half
    centre = np.clip(centre, np.minimum(lowest, highest), np.maximum(lowest, highest))
    low, high = centre - half, centre + half
    unit = view.shown.unit("length")
    caption = (f"Close-up A, true scale: {2 * half * 1e3:.3g} {unit} square about "
               f"{section.axes[0]}\u00a0=\u00a0{centre[0] * 1e3:.4g}\u00a0{unit}, "
               f"{section.axes[1]}\u00a0=\u00a0{centre[1] * 1e3:.4g}\u00a0{unit}. "
               f"{style.shortened(view.mesh.bodies[body].name)} is about {thick * 1e3:.2g} {unit} thick.")  # fmt: skip
    return low, high, caption


def _draw_close_up(made: pages.Page, view: View, section: Section, close_up) -> None:
    low, high, _ = close_up
    ax = made.detail
    _fill_bodies(ax, view, section)
    if view.mesh.dim == 2:
        _draw_boundaries(ax, view, tagged=False)
    ax.set_xlim(low[0] * 1e3, high[0] * 1e3)
    ax.set_ylim(low[1] * 1e3, high[1] * 1e3)
    ax.set_xticks([])
    ax.set_yticks([])
    centre = (low + high) / 2 * 1e3
    made.ax.plot(*centre, marker="s", markersize=9, markerfacecolor="none", markeredgecolor=style.INK, zorder=8)
    # "A" beside the marker, on the side where there is drawing
    limits = np.array([made.ax.get_xlim(), made.ax.get_ylim()])
    side = np.where(centre < limits.mean(axis=1), 1, -1)
    made.ax.annotate("A", centre, xytext=13 * side, textcoords="offset points", ha="center", va="center",
                     size=style.TEXT, weight="bold", path_effects=style.halo(2.5), zorder=9)  # fmt: skip
