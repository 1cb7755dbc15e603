"""Lines along which heat flows in a section, as segments with their direction.

In a 2D model they are contour lines of the stream function, the same heat between every two
neighbours. Where no stream function exists (heat generated inside) and in sections of a 3D model
(heat leaves the plane) they only show the direction, and the note under the picture says so.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from coldseam.report import style
from coldseam.report.plane import Section, isolines
from coldseam.report.stream import StreamFunction, stream_function
from coldseam.report.view import View

MOST_GENERATED = 0.02
"""Share of heat arising inside above which strips of equal heat would be a false claim."""


COARSE = 0.1
"""Misfit (energy norm) from which the heat between lines is called "about": coarse meshes, some per cent."""


@dataclass(frozen=True, kw_only=True, eq=False)
class FlowLines:
    """Segments (mm), shape (s, 2, 2); unit vectors along the heat flow, shape (s, 2); and what they mean."""

    segments: np.ndarray
    direction: np.ndarray
    note: str
    strip: float | None = None


def flow_lines(view: View, section: Section) -> FlowLines:
    """Return the heat-flow lines of a section."""
    nothing = np.empty((0, 2, 2))
    if section.flux is None or not np.any(np.linalg.norm(section.flux, axis=1) > 0):
        return FlowLines(segments=nothing, direction=nothing[:, 0], note="No heat flows in this section.")
    if view.mesh.dim == 3:
        note = "Lines show the direction of the heat flow within the section; isotherms are grey."
        if section.out_of_plane > 0.3:
            note += f" Much of the heat ({section.out_of_plane:.0%} of the flux) runs through this plane."
        return _traced(section, note)
    psi = stream_function(section, axisymmetric=view.mesh.axisymmetric, same=_same(view))
    if psi.generated > MOST_GENERATED or psi.step <= 0:
        note = "Lines show the direction of the heat flow only (heat arises inside the section); isotherms are grey."
        return _traced(section, note)
    return _contours(view, section, psi)


def _same(view: View) -> np.ndarray | None:
    """Return for every node the one it coincides with across contacts."""
    if view.mesh.links is None or len(view.mesh.links) == 0:
        return None
    from scipy.sparse import coo_matrix
    from scipy.sparse.csgraph import connected_components

    a, b = view.mesh.links[:, 0].ravel(), view.mesh.links[:, 1].ravel()
    n = view.mesh.n_nodes
    count, label = connected_components(coo_matrix((np.ones(len(a)), (a, b)), shape=(n, n)), directed=False)
    _, first = np.unique(label, return_index=True)
    return first[label]


def _contours(view: View, section: Section, psi: StreamFunction) -> FlowLines:
    low, high = psi.values.min(), psi.values.max()
    # lines half a step off the ends: the first strip then has its wall on one side and half a line's heat
    start = low + psi.step / 2 if len(psi.periods) == 0 else np.ceil(low / psi.step) * psi.step
    pieces, owners = [], []
    for level in np.arange(start, high, psi.step):
        segments, cell = isolines(section.points * 1e3, section.cells, psi.values, float(level))
        pieces.append(segments)
        owners.append(cell)
    segments = np.concatenate(pieces) if pieces else np.empty((0, 2, 2))
    owner = np.concatenate(owners) if owners else np.empty(0, dtype=np.int64)
    unit = view.shown.unit("flow")
    unit = {"W/m": "W per metre of depth", "Btu/(h·ft)": "Btu/h per foot of depth"}.get(unit, unit)
    about = "about " if len(psi.periods) > 1 or psi.misfit > COARSE else ""
    note = f"Between two neighbouring lines flows {about}{style.number(psi.step)} {unit}; isotherms are grey."
    if view.mesh.axisymmetric:
        note += " The heat is that of the whole turn, so lines stand wider apart near the axis."
    return FlowLines(segments=segments, direction=_along(segments, section.flux[owner]), note=note, strip=psi.step)


def _along(segments: np.ndarray, flux: np.ndarray) -> np.ndarray:
    along = segments[:, 1] - segments[:, 0]
    sign = np.where(np.einsum("si,si->s", along, flux) < 0, -1.0, 1.0)
    length = np.linalg.norm(along, axis=1)
    return along * (sign / np.where(length > 0, length, 1.0))[:, None]


def _traced(section: Section, note: str, lines: int = 90, steps: int = 400) -> FlowLines:
    """Return lines traced through the cells' flux in steps of a fixed length from evenly spread seeds."""
    from matplotlib.tri import Triangulation

    points, span = section.points, np.ptp(section.points, axis=0)
    finder = Triangulation(points[:, 0], points[:, 1], section.cells).get_trifinder()
    size = np.linalg.norm(section.flux, axis=1)
    unit = section.flux / np.where(size > 1e-9 * size.max(), size, np.inf)[:, None]
    spacing = np.sqrt(span[0] * span[1] / lines)
    grid = np.meshgrid(
        *(points.min(axis=0)[k] + np.arange(spacing / 2, max(span[k], spacing), spacing) for k in (0, 1))
    )
    seeds = np.stack([axis.ravel() for axis in grid], axis=1)
    seeds = seeds[finder(*seeds.T) >= 0]
    reached = section.cell_body[finder(*seeds.T)] if len(seeds) else np.empty(0, dtype=np.int64)
    missed = np.setdiff1d(section.cell_body, reached).tolist()  # every body gets a line, however small
    peaks = [int(np.argmax(np.where(section.cell_body == body, size, -1.0))) for body in missed]
    seeds = np.vstack([points[section.cells[np.array(peaks, dtype=int)]].mean(axis=1), seeds])
    stride = float(max(span)) / steps
    taken = np.zeros(tuple(np.maximum(1, np.ceil(span / (spacing * 0.4))).astype(int) + 1), dtype=bool)
    back, forth = (_trace(finder, unit, seeds, sign * stride, steps) for sign in (-1, 1))
    pieces = []
    for k, seed in enumerate(seeds):  # a few dozen lines: one is kept where none passes close by
        square = tuple(np.floor((seed - points.min(axis=0)) / (spacing * 0.4)).astype(int))
        line = np.vstack([back[:0:-1, k], forth[:, k]])
        line = line[np.isfinite(line[:, 0])]
        if taken[square] or len(line) < 2:
            continue
        rows = np.floor((line - points.min(axis=0)) / (spacing * 0.4)).astype(int)
        rows = np.clip(rows, 0, np.array(taken.shape) - 1)
        if taken[rows[:, 0], rows[:, 1]].mean() > 0.3:
            continue
        taken[rows[:, 0], rows[:, 1]] = True
        pieces.append(np.stack([line[:-1], line[1:]], axis=1))
    segments = np.concatenate(pieces) * 1e3 if pieces else np.empty((0, 2, 2))
    along = segments[:, 1] - segments[:, 0]
    length = np.linalg.norm(along, axis=1, keepdims=True)
    return FlowLines(segments=segments, direction=along / np.where(length > 0, length, 1.0), note=note)


def _trace(finder, unit: np.ndarray, seeds: np.ndarray, stride: float, steps: int) -> np.ndarray:
    """Return traced lines (midpoint rule), shape (steps + 1, n, 2); NaN once a line has left the section."""
    lines = np.full((steps + 1, len(seeds), 2), np.nan)
    lines[0] = at = seeds
    alive = np.arange(len(seeds))
    for step in range(steps):
        cell = finder(*at.T)
        middle = finder(*(at + 0.5 * stride * unit[cell]).T)
        move = stride * unit[np.where(middle >= 0, middle, cell)]
        at = at + move
        going = (finder(*at.T) >= 0) & np.any(move != 0, axis=1)
        alive, at = alive[going], at[going]
        if len(alive) == 0:
            break
        lines[step + 1, alive] = at
    return lines
