"""Placing labels on lines so that none covers another or is cut by the edge.

Every label gets the candidate point on its own line that keeps farthest from the other lines and
from the labels already set. A label that fits nowhere is left out: the colour bar carries the same
values.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from coldseam.report import style

CLEAR = 0.25
"""Least distance of a label's place to the next line, as a part of the label's height."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Wanted:
    """A label looking for a place: its text and the positions (n, 2), in data coordinates, that it may stand on."""

    text: str
    points: np.ndarray


def set_labels(
    ax,
    wanted: list[Wanted],
    *,
    size: float = style.SMALL,
    boxed: bool = False,
    spare_small: bool = False,
    avoid: np.ndarray | None = None,
    lines: np.ndarray | None = None,
) -> list:
    """Set labels on axes and return the text artists.

    Parameters
    ----------
    ax
        Axes whose limits and position are final.
    wanted
        The labels.
    size
        Font size, points.
    boxed
        Draw a circle round each text, for reference numbers.
    spare_small
        Leave out labels on lines hardly longer than the label itself, or where lines crowd.
    avoid
        Boxes in pixels that no label may touch, shape (n, 4): x0, y0, x1, y1.
    lines
        More points, in data coordinates, from which labels keep away, shape (n, 2).
    """
    figure = ax.figure
    frame = ax.get_window_extent().padded(-3.0)
    crowd = [_pixels(ax, _thin(entry.points, 400)) for entry in wanted]
    taken = np.empty((0, 4)) if avoid is None else np.asarray(avoid, dtype=float).reshape(-1, 4)
    drawn = [] if lines is None else [_pixels(ax, lines)]
    made = []
    # short lines first: they have the fewest places to choose from
    for k in sorted(range(len(wanted)), key=lambda k: len(wanted[k].points)):
        wide = style.text_width(wanted[k].text, size) * figure.dpi + 4
        tall = size / 72 * figure.dpi * 1.25 + 2
        if boxed:
            wide = tall = max(wide, tall) + 5
        own = crowd[k][_roomy(crowd[k], 1.5 * wide)] if spare_small else crowd[k]
        others = drawn + [points for j, points in enumerate(crowd) if j != k and len(points)]
        points = np.vstack(others) if others else np.empty((0, 2))
        if spare_small:
            own = own[_apart(own, points, CLEAR * tall)]
        spot = _spot(own, points, taken, (wide, tall), frame)
        if spot is None:
            continue
        taken = np.vstack([taken, [spot[0] - wide / 2, spot[1] - tall / 2, spot[0] + wide / 2, spot[1] + tall / 2]])
        made.append(_write(ax, wanted[k].text, ax.transData.inverted().transform(spot), size, boxed))
    return made


def _write(ax, text: str, at, size: float, boxed: bool):
    look = (
        {"path_effects": style.halo(2.2)}
        if not boxed
        else {
            "bbox": {
                "boxstyle": "circle,pad=0.22",
                "facecolor": style.PAPER,
                "edgecolor": style.INK,
                "linewidth": style.HAIR,
            }
        }
    )
    return ax.text(
        at[0],
        at[1],
        text,
        size=size,
        ha="center",
        va="center_baseline" if not boxed else "center",
        zorder=9,
        clip_on=False,
        **look,
    )


def _thin(points: np.ndarray, most: int) -> np.ndarray:
    if len(points) <= most:
        return points
    return points[np.linspace(0, len(points) - 1, most).astype(int)]


def _roomy(points: np.ndarray, least: float) -> np.ndarray:
    """Return which points stand on a piece of line at least so long (pixels): labels would only hide smaller ones."""
    if len(points) < 2:
        return np.zeros(len(points), dtype=bool)
    from scipy.sparse.csgraph import connected_components
    from scipy.spatial import cKDTree

    tree = cKDTree(points)
    gap = float(np.median(tree.query(points, k=2)[0][:, 1]))
    near = tree.sparse_distance_matrix(tree, max(0.3 * least, 2.5 * gap))
    count, piece = connected_components(near, directed=False)
    low, high = np.full((count, 2), np.inf), np.full((count, 2), -np.inf)
    np.minimum.at(low, piece, points)
    np.maximum.at(high, piece, points)
    return ((high - low).max(axis=1) >= least)[piece]


def _apart(points: np.ndarray, others: np.ndarray, least: float) -> np.ndarray:
    """Return which points lie at least so far (pixels) from all others: nearer, a label could belong to any line."""
    if len(points) == 0 or len(others) == 0:
        return np.ones(len(points), dtype=bool)
    from scipy.spatial import cKDTree

    return cKDTree(others).query(points)[0] >= least


def _pixels(ax, points: np.ndarray) -> np.ndarray:
    return ax.transData.transform(points) if len(points) else np.empty((0, 2))


def _spot(candidates, others, taken, size, frame):
    """Return the best candidate in pixels, or None if every one would touch a label or the edge."""
    if len(candidates) == 0:
        return None
    half = np.array(size) / 2
    low, high = candidates - half, candidates + half
    fits = (low[:, 0] > frame.x0) & (high[:, 0] < frame.x1) & (low[:, 1] > frame.y0) & (high[:, 1] < frame.y1)
    for box in taken:
        fits &= (low[:, 0] > box[2]) | (high[:, 0] < box[0]) | (low[:, 1] > box[3]) | (high[:, 1] < box[1])
    candidates = candidates[fits]
    if len(candidates) == 0:
        return None
    score = np.full(len(candidates), size[1] * 2.0)
    if len(others):
        from scipy.spatial import cKDTree

        score = np.minimum(score, cKDTree(others).query(candidates)[0])
    edge = np.minimum(candidates - [frame.x0, frame.y0], [frame.x1, frame.y1] - candidates).min(axis=1)
    score = score + 0.25 * np.minimum(edge, 3 * size[1])
    if len(taken):
        centres = 0.5 * (taken[:, :2] + taken[:, 2:])
        gap = np.min(np.linalg.norm(candidates[:, None] - centres[None], axis=2), axis=1)
        score = score + 0.15 * np.minimum(gap, 6 * size[1])
    return candidates[np.argmax(score)]


def boxes(artists: list) -> np.ndarray:
    """Return the boxes that texts take, pixels, shape (n, 4)."""
    found = []
    for artist in artists:
        patch = artist.get_bbox_patch()
        extent = (patch or artist).get_window_extent()
        found.append([extent.x0, extent.y0, extent.x1, extent.y1])
    return np.array(found).reshape(-1, 4)
