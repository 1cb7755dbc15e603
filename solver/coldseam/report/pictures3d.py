"""Pictures of 3D models: from outside, from each space, and in sections.

Sections are drawn by :mod:`coldseam.report.pictures2d` and need no VTK; views in space are painted
off-screen (:mod:`coldseam.report.scene`) and get their lines and labels here.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np

from coldseam.answers.surfacemap import SurfaceMap
from coldseam.report import page as pages
from coldseam.report import scene as scenes
from coldseam.report import style
from coldseam.report.labels import Wanted, set_labels
from coldseam.report.pictures2d import _counted, _lines, model_table, temperature_table
from coldseam.report.plane import AXES, isolines
from coldseam.report.view import Picture, View, boundary_areas

EVEN = 0.02
MIDDLE = "through the middle"
CORNER_VIEW = np.array([0.62, -0.70, 0.50])


@dataclass(frozen=True, kw_only=True)
class Spot:
    """A plane worth cutting at: axis, place (m) and why."""

    axis: int
    at: float
    why: str


def section_spots(view: View) -> list[Spot]:
    """Return where a 3D model is cut: through its middle, and through the coldest point on the warmest side."""
    low, high = view.mesh.points.min(axis=0), view.mesh.points.max(axis=0)
    spots = [Spot(axis=k, at=float((low[k] + high[k]) / 2), why=MIDDLE) for k in range(3)]
    coldest = coldest_point(view)
    if coldest is not None:
        for k in range(3):
            inside = np.clip(coldest[k], low[k] + 1e-3 * (high[k] - low[k]), high[k] - 1e-3 * (high[k] - low[k]))
            if abs(inside - spots[k].at) < 0.02 * (high[k] - low[k]) or inside != coldest[k]:
                continue  # seen already, or the plane would only graze a face
            spots.append(Spot(axis=k, at=float(inside), why="through the coldest point of the warm side"))
    return spots


def coldest_point(view: View) -> np.ndarray | None:
    """Return the coldest point of the surface that faces the warmest space, m, or None."""
    spaces = view.answers.get("spaces", {})
    warm = [space for space in view.spaces if isinstance(spaces.get(space, {}).get("temperature"), (int, float))]
    if view.temperature is None or not warm:
        return None
    warmest = max(warm, key=lambda space: spaces[space]["temperature"])
    nodes = np.unique(view.mesh.facets[view.faces_space(warmest)])
    return view.mesh.points[nodes[np.argmin(view.temperature[nodes])]]


def draw_boundaries(view: View, folder: Path, name: str, *, behind: bool = False) -> Picture:
    """Draw the model from a corner (or the opposite one), boundaries tinted and numbered, named in the legend."""
    mesh = view.mesh
    tints = np.array([_rgb(style.face_colour(k, kind)) for k, kind in enumerate(view.boundary_kind)])
    seen = scenes.paint(mesh.points, mesh.facets, _direction(behind), colours=tints[view.facet_boundary])
    title = "Model, boundaries" + (", from the opposite corner" if behind else "")
    handles, labels = _face_legend(view)
    with style.applied():
        made = _open(view, seen, title, legend=(handles, labels), notes=(_eye_note(view, seen),))
        _edges(made.ax, view, seen)
        set_labels(made.ax, _tags(view, seen), boxed=True)
        file, _ = pages.save(made, folder, name, vector=False)
    alt = f"{title}: {', '.join(map(style.plain, view.boundary_names))}."
    return Picture(file=file, title=title, alt=alt, table=model_table(view))


def draw_surface(
    view: View, folder: Path, name: str, *, space: str | None = None, behind: bool = False, close: bool = False
) -> Picture | None:
    """Draw the surface temperature of the whole model, or of the side that faces a space as seen from there.

    With ``close`` only the part where the isotherms crowd is shown, larger; None if they don't crowd.
    """
    title = "Surface temperature" + (", from the opposite corner" if behind else "")
    if space is not None:
        title = f"Surface temperature, side of {style.shortened(space)}"
    shown = _Shown(
        values=view.temperature,
        unit=view.shown.unit("temperature"),
        title=title,
        mark="lowest" if space is not None else "",
    )
    rows = np.arange(len(view.mesh.facets)) if space is None else np.flatnonzero(view.faces_space(space))
    toward = _direction(behind) if space is None else _from_space(view, rows)
    return _draw_field(view, shown, rows, toward, folder, name, front_only=space is not None, close=close)


def draw_map(view: View, field: SurfaceMap, folder: Path, name: str, *, close: bool = False) -> Picture | None:
    """Draw a field on the side of a space as seen from there; ``close`` as in :func:`draw_surface`."""
    title = f"{field.title}, side of {style.shortened(field.space)}"
    shown = _Shown(values=field.values, unit=field.unit, title=title, mark="highest", note=field.note)
    rows = np.flatnonzero(view.faces_space(field.space))
    rows = rows[np.isfinite(field.values[view.mesh.facets[rows]]).all(axis=1)]
    return _draw_field(view, shown, rows, _from_space(view, rows), folder, name, front_only=True, close=close)


# ---------------------------------------------------------------------------------------- parts


@dataclass(frozen=True, kw_only=True, eq=False)
class _Shown:
    """A field at the nodes, its unit, the picture's title, the extreme that is marked ("" for none), a note."""

    values: np.ndarray
    unit: str
    title: str
    mark: str
    note: str = ""


def _draw_field(
    view: View, shown: _Shown, rows: np.ndarray, toward, folder: Path, name: str, *, front_only: bool, close: bool
) -> Picture | None:
    mesh, values = view.mesh, shown.values
    facets = mesh.facets[rows]
    nodes = np.unique(facets)
    low, high = float(values[nodes].min()), float(values[nodes].max())
    ends = (low, high)
    if view.scale and shown.unit == view.shown.unit("temperature"):
        low, high = view.scale
    levels = style.round_levels(low, high)
    levels = levels[
        levels > low + EVEN * (high - low)
    ]  # a line just above the lowest value wanders over the plain part
    places = style.decimals(levels) if len(levels) else 2
    window = _crowded(view, facets, values, toward, levels) if close else None
    if close and window is None:
        return None
    filled = np.where(np.isfinite(values), values, low)
    seen = scenes.paint(mesh.points, facets, toward, values=filled, span=(low, max(high, low + 1e-9)),
                        front_only=front_only, window=window)  # fmt: skip
    words = [style.amount(value, max(1, places), shown.unit) for value in ends]
    read = f"From {words[0]} to {words[1]}."
    extreme = mesh.points[nodes[(np.argmax if shown.mark == "highest" else np.argmin)(values[nodes])]]
    marked = bool(shown.mark) and bool(seen.visible(extreme[None], 0.01 * mesh.size)[0])
    title = shown.title + (", close-up" if close else "")
    with style.applied():
        mark = f" The white-edged triangle marks the {shown.mark}." if marked else ""
        notes = (read + mark, *([shown.note] if shown.note else []), _eye_note(view, seen))
        made = _open(view, seen, title, bar=True, notes=notes)
        _edges(made.ax, view, seen, rows)
        _isolines(made.ax, view, seen, facets, filled, (low, high), levels, places, shown.unit)
        if marked:
            made.ax.plot(
                *seen.place(extreme), "v", color=style.INK, markeredgecolor=style.PAPER, markersize=7, zorder=8
            )
        pages.colour_bar(made, low, high, levels, shown.unit)
        file, _ = pages.save(made, folder, name, vector=False)
    return Picture(file=file, title=title, alt=f"{title}. {read} {shown.note}".strip(), table=temperature_table(view))


def _direction(behind: bool) -> np.ndarray:
    return -CORNER_VIEW if behind else CORNER_VIEW


def _crowded(view: View, facets, values, toward, levels) -> tuple[np.ndarray, np.ndarray] | None:
    """Return the part of the picture plane (m) where nine tenths of the isotherms are, if that is small."""
    right, up, _ = scenes.frame(toward)
    lines = [isolines(view.mesh.points, facets, values, level)[0] for level in levels]
    if not lines or sum(map(len, lines)) == 0:
        return None
    middle = np.concatenate(lines).mean(axis=1)
    flat = np.stack([middle @ right, middle @ up], axis=1)
    whole = np.stack(
        [view.mesh.points[facets].reshape(-1, 3) @ right, view.mesh.points[facets].reshape(-1, 3) @ up], axis=1
    )
    nodes = np.unique(facets)
    coldest, warmest = nodes[np.argmin(values[nodes])], nodes[np.argmax(values[nodes])]
    ends = view.mesh.points[[coldest, warmest]] @ np.stack([right, up], axis=1)
    # the extreme that stands among the isotherms is the one to look at (a bolt may be the coldest or the warmest)
    near = [np.quantile(np.linalg.norm(flat - end, axis=1), 0.02) for end in ends]
    centre = ends[int(np.argmin(near))]
    distance = np.sort(np.abs(flat - centre).max(axis=1))
    # the lines about this one spot end where the next lines are far away (other bolts); else most of the lines
    gaps = np.flatnonzero(distance[1:] > 2.5 * distance[:-1])
    gaps = gaps[gaps >= 20]
    reach = 1.3 * (distance[gaps[0]] if len(gaps) else np.quantile(distance, 0.6))
    reach = max(float(reach), 1e-3 * view.mesh.size)
    if reach > 0.25 * np.ptp(whole, axis=0).max():
        return None
    low = np.maximum(centre - reach, whole.min(axis=0))
    high = np.minimum(centre + reach, whole.max(axis=0))
    return low, high


def _rgb(colour: str) -> list[int]:
    return [int(colour[k : k + 2], 16) for k in (1, 3, 5)]


def _from_space(view: View, rows: np.ndarray) -> np.ndarray:
    """Return the direction from which most of some facets is seen; squarely if they are nearly one plane."""
    corner = view.mesh.points[view.mesh.facets[rows]]
    normal = np.cross(corner[:, 1] - corner[:, 0], corner[:, 2] - corner[:, 0])
    signs = np.array([[a, b, c] for a in (1, -1) for b in (-1, 1) for c in (1, -1)], dtype=float)
    mean = normal.sum(axis=0)
    size = np.linalg.norm(mean)
    if size > 0.85 * np.linalg.norm(normal, axis=1).sum():  # nearly one plane: look at it almost squarely
        return mean / size
    choices = signs * np.array([0.62, 0.70, 0.50])
    shown = [float(np.maximum(normal @ choice, 0).sum()) for choice in choices]
    return choices[int(np.argmax(shown))]


def _open(view: View, seen, title: str, *, bar=False, legend=None, notes=()):
    made = pages.open_page(seen.low, seen.high, heading=title, title=view.title, axes=("", ""), bar=bar, legend=legend,
                           notes=notes)  # fmt: skip
    made.ax.imshow(seen.image, extent=(seen.low[0], seen.high[0], seen.low[1], seen.high[1]), aspect="auto",
                   interpolation="antialiased", zorder=1)  # fmt: skip
    made.ax.set_xlim(seen.low[0], seen.high[0])
    made.ax.set_ylim(seen.low[1], seen.high[1])
    return made


def _eye_note(view: View, seen) -> str:
    """Return from where one looks, in words of the axes."""
    strong = [(abs(seen.toward[k]), f"{'+' if seen.toward[k] > 0 else '−'}{AXES[k]}") for k in range(3)]
    named = [text for size, text in sorted(strong, reverse=True) if size > 0.15]
    span = f"{style.number((seen.high - seen.low)[0], 2)} {view.shown.unit('length')}"
    return f"Seen from {', '.join(named)}, without perspective; the picture is {span} wide."


def _face_legend(view: View) -> tuple[list, list[str]]:
    from matplotlib.patches import Patch

    areas = boundary_areas(view)
    handles, labels = [], []
    for k, name in enumerate(view.boundary_names[:24]):
        colour = style.face_colour(k, view.boundary_kind[k])
        handles.append(Patch(facecolor=colour, edgecolor=style.SOFT, linewidth=style.HAIR))
        labels.append(f"{k + 1}  {style.shortened(name, 32)}, {style.area_text(areas[k], view.shown)}")
    return _counted(handles, labels, len(view.boundary_names), "boundaries")


def _edges(ax, view: View, seen, rows: np.ndarray | None = None) -> None:
    """Draw the edges where faces meet at an angle, or bodies or boundaries change, if they are seen."""
    mesh = view.mesh
    rows = np.arange(len(mesh.facets)) if rows is None else rows
    segments = _feature_edges(mesh, rows, mesh.cell_body[mesh.facet_cell], view.facet_boundary)
    _visible_lines(ax, seen, segments, style.INK, style.THIN, 0.006 * mesh.size)


def _feature_edges(mesh, rows, body, boundary) -> np.ndarray:
    facets = mesh.facets[rows]
    corner = mesh.points[facets]
    normal = np.cross(corner[:, 1] - corner[:, 0], corner[:, 2] - corner[:, 0])
    normal /= np.maximum(np.linalg.norm(normal, axis=1, keepdims=True), 1e-300)
    edges = np.sort(facets[:, [0, 1, 1, 2, 2, 0]].reshape(-1, 2), axis=1)
    owner = np.repeat(np.arange(len(facets)), 3)
    key = edges[:, 0] * mesh.n_nodes + edges[:, 1]
    order = np.argsort(key, kind="stable")
    key, owner = key[order], owner[order]
    pair = np.flatnonzero(key[1:] == key[:-1])
    a, b = owner[pair], owner[pair + 1]
    same = np.einsum("ij,ij->i", normal[a], normal[b]) > np.cos(np.radians(30))
    same &= (body[rows[a]] == body[rows[b]]) & (boundary[rows[a]] == boundary[rows[b]])
    hidden = np.zeros(len(key), dtype=bool)
    hidden[pair[same]] = hidden[pair[same] + 1] = True
    kept = np.unique(key[~hidden])
    return mesh.points[np.stack([kept // mesh.n_nodes, kept % mesh.n_nodes], axis=1)]


def _visible_lines(ax, seen, segments: np.ndarray, colour: str, width: float, slack: float) -> np.ndarray:
    """Draw the seen parts of segments (long ones in pieces) and return those pieces, shape (s, 2, 3)."""
    if len(segments) == 0:
        return segments
    scale = float(np.max(seen.high - seen.low)) / 1e3
    length = np.linalg.norm(segments[:, 1] - segments[:, 0], axis=1)
    count = np.clip(np.ceil(length / (0.01 * scale)), 1, 100).astype(int)
    which = np.repeat(np.arange(len(segments)), count)
    piece = np.arange(len(which)) - np.repeat(np.cumsum(count) - count, count)
    share = np.stack([piece, piece + 1], axis=1) / count[which][:, None]
    start, along = segments[which, 0], (segments[:, 1] - segments[:, 0])[which]
    pieces = start[:, None] + share[:, :, None] * along[:, None]
    middle = pieces.mean(axis=1)
    spot = seen.place(middle)
    inside = np.all((spot > seen.low) & (spot < seen.high), axis=1)
    pieces = pieces[inside & seen.visible(middle, slack)]
    _lines(ax, seen.place(pieces), colour, width)
    return pieces


def _isolines(ax, view: View, seen, facets, values, span, levels, places: int, unit: str) -> None:
    mesh = view.mesh
    wanted = []
    for level in levels:
        segments, cell = isolines(mesh.points, facets, values, level)
        corner = mesh.points[facets[cell]]
        normal = np.cross(corner[:, 1] - corner[:, 0], corner[:, 2] - corner[:, 0])
        segments = segments[normal @ seen.toward > 1e-9 * np.linalg.norm(normal, axis=1)]
        colour = style.contrast((level - span[0]) / (span[1] - span[0]))
        pieces = _visible_lines(ax, seen, segments, colour, style.THIN, 0.004 * mesh.size)
        wanted.append(Wanted(text=style.amount(level, places, unit), points=seen.place(pieces.mean(axis=1))))
    set_labels(ax, wanted, spare_small=True)


def _tags(view: View, seen) -> list[Wanted]:
    """Return the number of every boundary with the seen centres of its facets that lie deep inside it."""
    from scipy.ndimage import distance_transform_edt
    from scipy.spatial import cKDTree

    mesh = view.mesh
    rows, columns = np.mgrid[4 : seen.depth.shape[0] : 6, 4 : seen.depth.shape[1] : 6]
    depth = seen.depth[rows, columns]
    share = np.stack([(columns + 0.5) / seen.depth.shape[1], 1 - (rows + 0.5) / seen.depth.shape[0]], axis=-1)
    flat = (seen.low + share * (seen.high - seen.low)) / 1e3
    point = flat[..., :1] * seen.right + flat[..., 1:] * seen.up + depth[..., None] * seen.toward
    found = np.isfinite(depth)
    # which boundary a seen point belongs to: that of the nearest facet sample
    corner = mesh.points[mesh.facets]
    normal = np.cross(corner[:, 1] - corner[:, 0], corner[:, 2] - corner[:, 0])
    front = np.flatnonzero(normal @ seen.toward > 0)
    samples = np.concatenate([corner[front].mean(axis=1)] + [
        (0.8 * corner[front, k] + 0.1 * corner[front].sum(axis=1) - 0.1 * corner[front, k]) for k in range(3)
    ])  # fmt: skip
    label = np.full(depth.shape, -1)
    nearest = cKDTree(samples).query(point[found])[1]
    label[found] = view.facet_boundary[front[nearest % len(front)]]
    wanted = []
    for k in range(len(view.boundary_names)):
        inside = distance_transform_edt(np.pad(label == k, 1))[1:-1, 1:-1]
        if inside.max() < 1:
            continue
        best = inside >= 0.9 * inside.max()
        wanted.append(Wanted(text=str(k + 1), points=flat[best] * 1e3))
    return wanted
