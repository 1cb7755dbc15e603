"""Plane geometry for drawing: sections of a model, outlines, ordered paths, lines of equal value.

A :class:`Section` is a triangle mesh in a plane with its fields; a 2D model is one as it is, a 3D
model is cut by a plane. Everything here is numpy on whole arrays; nothing draws.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from coldseam.mesh.build import number_facets
from coldseam.report.view import View

AXES = "xyz"


@dataclass(frozen=True, kw_only=True, eq=False)
class Section:
    """Triangles in a plane with what is drawn on them.

    Parameters
    ----------
    points
        m, shape (n, 2).
    cells
        Counterclockwise triangles, shape (m, 3).
    cell_body
        Index into the mesh's bodies, shape (m,).
    temperature
        °C at the points, shape (n,), or None.
    flux
        In-plane heat flux of the cells, W/m², shape (m, 2), or None.
    axes
        Names of the two coordinates, for example ("x", "z"), or ("r", "z").
    where
        The cutting plane in words, empty for a 2D model.
    out_of_plane
        Share of the heat flux (energy-weighted) that runs through the plane instead of in it.
    """

    points: np.ndarray
    cells: np.ndarray
    cell_body: np.ndarray
    temperature: np.ndarray | None
    flux: np.ndarray | None
    axes: tuple[str, str]
    where: str = ""
    out_of_plane: float = 0.0


def section_of_plane_model(view: View) -> Section:
    """Return a 2D or axisymmetric model as a section."""
    mesh = view.mesh
    axes = ("r", "z") if mesh.axisymmetric else ("x", "y")
    return Section(
        points=mesh.points,
        cells=mesh.cells,
        cell_body=mesh.cell_body,
        temperature=view.temperature,
        flux=view.cell_flux,
        axes=axes,
    )


def cut(view: View, axis: int, at: float) -> Section | None:
    """Return the section of a 3D model by the plane ``axis = at`` (m), or None if it misses.

    A plane through nodes is a normal case (symmetry planes, middles of boxes): nodes on it count
    as just beyond it, and corners that fall together are merged.
    """
    mesh = view.mesh
    distance = mesh.points[:, axis] - at
    distance = np.where(np.abs(distance) <= 1e-9 * mesh.size, 0.0, distance)
    below = distance < 0
    count = below[mesh.cells].sum(axis=1)
    hit = np.flatnonzero((count > 0) & (count < 4))
    if len(hit) == 0:
        return None
    triangles, owner = _cut_edges(mesh.cells[hit], below, count[hit])
    low, high = triangles.min(axis=2), triangles.max(axis=2)
    low, high = np.where(distance[high] == 0, high, low), np.where(distance[low] == 0, low, high)
    key, corner = np.unique(low * mesh.n_nodes + high, return_inverse=True)
    corner = corner.reshape(-1, 3)
    a, b = key // mesh.n_nodes, key % mesh.n_nodes
    span = distance[a] - distance[b]
    share = np.where(a == b, 0.0, distance[a] / np.where(span == 0, 1.0, span))
    plane = [k for k in range(3) if k != axis]
    points = (mesh.points[a] + share[:, None] * (mesh.points[b] - mesh.points[a]))[:, plane]
    area = _area(points, corner)
    keep = np.abs(area) > 1e-14 * mesh.size**2
    corner, owner, area = corner[keep], hit[owner[keep]], area[keep]
    corner[area < 0] = corner[area < 0][:, ::-1]
    temperature = flux = None
    through = 0.0
    if view.temperature is not None:
        temperature = view.temperature[a] + share * (view.temperature[b] - view.temperature[a])
    if view.cell_flux is not None and len(corner):
        q = view.cell_flux[owner]
        flux = q[:, plane]
        through = float(np.sqrt(np.average(q[:, axis] ** 2, weights=np.abs(area))))
        through /= max(float(np.sqrt(np.average((q**2).sum(axis=1), weights=np.abs(area)))), 1e-300)
    if len(corner) == 0:
        return None
    return Section(
        points=points,
        cells=corner,
        cell_body=mesh.cell_body[owner],
        temperature=temperature,
        flux=flux,
        axes=(AXES[plane[0]], AXES[plane[1]]),
        where=f"{AXES[axis]}\u00a0=\u00a0{at * 1e3:.4g}\u00a0{view.shown.unit('length')}",
        out_of_plane=through,
    )


def _cut_edges(cells: np.ndarray, below: np.ndarray, count: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return triangles as pairs of cut edges' nodes, shape (t, 3, 2), and the row of each one's cell."""
    order = np.argsort(below[cells], axis=1, kind="stable")
    cells = np.take_along_axis(cells, order, axis=1)  # nodes above first, then those below
    pieces = []
    for n_below, corners in (
        (1, ([(3, 0), (3, 1), (3, 2)],)),
        (3, ([(0, 1), (0, 2), (0, 3)],)),
        (2, ([(0, 2), (0, 3), (1, 3)], [(0, 2), (1, 3), (1, 2)])),
    ):
        rows = np.flatnonzero(count == n_below)
        pieces += [(cells[rows][:, np.array(corner)], rows) for corner in corners]
    return np.concatenate([piece for piece, _ in pieces]), np.concatenate([rows for _, rows in pieces])


def _area(points: np.ndarray, cells: np.ndarray) -> np.ndarray:
    edge = points[cells[:, 1:]] - points[cells[:, :1]]
    return 0.5 * (edge[:, 0, 0] * edge[:, 1, 1] - edge[:, 0, 1] * edge[:, 1, 0])


def outline_edges(cells: np.ndarray, group: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return the directed edges (group on the left) that bound groups of triangles.

    Parameters
    ----------
    cells
        Counterclockwise triangles, shape (m, 3).
    group
        Number of each cell's group, shape (m,).

    Returns
    -------
    edges, edge_group
        Shapes (e, 2) and (e,). An edge between two groups appears once for each.
    """
    cell_facets, unique = number_facets(cells)
    first = np.full(len(unique), -1, dtype=np.int64)
    last = np.full(len(unique), -1, dtype=np.int64)
    flat = cell_facets.ravel()
    owner = np.repeat(np.arange(len(cells)), 3)
    first[flat[::-1]] = owner[::-1]
    last[flat] = owner
    single = first == last
    bounds = single | (group[first] != group[last])
    row, local = np.nonzero(bounds[cell_facets])
    pairs = np.array([[1, 2], [2, 0], [0, 1]])
    return cells[row[:, None], pairs[local]], group[row]


def chain(edges: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Order directed edges into paths.

    Parameters
    ----------
    edges
        Start and end node, shape (e, 2).

    Returns
    -------
    order
        Edge numbers, path after path, shape (e,).
    path
        Path number of each entry of ``order``. A closed path ends where it starts.
    """
    from scipy.sparse import coo_matrix
    from scipy.sparse.csgraph import connected_components

    n = len(edges)
    if n == 0:
        return np.empty(0, dtype=np.int64), np.empty(0, dtype=np.int64)
    following = _successors(edges)
    has = following >= 0
    graph = coo_matrix((np.ones(has.sum()), (np.flatnonzero(has), following[has])), shape=(n, n))
    n_paths, label = connected_components(graph, directed=False)
    # a closed path has no last edge: cut it before its lowest edge number
    ends = np.bincount(label[~has], minlength=n_paths)
    lowest = np.full(n_paths, n, dtype=np.int64)
    np.minimum.at(lowest, label, np.arange(n))
    closing = has & (ends[label] == 0) & (following == lowest[label])
    step = np.where(has & ~closing, following, np.arange(n))
    rank = (step != np.arange(n)).astype(np.int64)
    for _ in range(int(np.ceil(np.log2(max(n, 2))))):  # pointer doubling: distance to the path's end
        rank = rank + rank[step]
        step = step[step]
    order = np.lexsort((-rank, label))
    return order, label[order]


def _successors(edges: np.ndarray) -> np.ndarray:
    """Return the edge that follows each edge, or -1; the k-th into a node goes on as the k-th out."""
    n = len(edges)

    def ranked(nodes: np.ndarray) -> np.ndarray:
        order = np.argsort(nodes, kind="stable")
        ordered = nodes[order]
        rank = np.empty(n, dtype=np.int64)
        rank[order] = np.arange(n) - np.searchsorted(ordered, ordered)
        return nodes * np.int64(n) + rank

    out_key, in_key = ranked(edges[:, 0]), ranked(edges[:, 1])
    order = np.argsort(out_key)
    place = np.searchsorted(out_key[order], in_key)
    place_ok = np.minimum(place, n - 1)
    return np.where(out_key[order][place_ok] == in_key, order[place_ok], -1)


def chains(edges: np.ndarray) -> list[np.ndarray]:
    """Return directed edges, node numbers of shape (n, 2), as paths of edge numbers, longest in edges first."""
    order, path = chain(edges)
    if len(order) == 0:
        return []
    return sorted(np.split(order, np.flatnonzero(np.diff(path)) + 1), key=len, reverse=True)


def paths(edges: np.ndarray) -> list[np.ndarray]:
    """Return directed edges, shape (n, 2), as paths of nodes, longest in edges first; closed ones end where they start."""
    return [np.append(edges[part, 0], edges[part[-1], 1]) for part in chains(edges)]


def isolines(points: np.ndarray, cells: np.ndarray, values: np.ndarray, level: float) -> tuple[np.ndarray, np.ndarray]:
    """Return where a linear field takes a value, as segments.

    Parameters
    ----------
    points
        Shape (n, d), d = 2 or 3.
    cells
        Triangles, shape (m, 3).
    values
        At the points, shape (n,), or at each cell's corners, shape (m, 3).
    level
        The value.

    Returns
    -------
    segments, cell
        Shapes (s, 2, d) and (s,).
    """
    corner = values if values.ndim == 2 else values[cells]
    above = corner >= level
    count = above.sum(axis=1)
    hit = np.flatnonzero((count == 1) | (count == 2))
    corner, above = corner[hit], above[hit]
    lone_is_above = count[hit] == 1
    lone = np.argmax(above == lone_is_above[:, None], axis=1)
    rows = np.arange(len(hit))
    ends = []
    for shift in (1, 2):
        other = (lone + shift) % 3
        share = (level - corner[rows, lone]) / (corner[rows, other] - corner[rows, lone])
        start, end = points[cells[hit, lone]], points[cells[hit, other]]
        ends.append(start + share[:, None] * (end - start))
    segments = np.stack(ends, axis=1)
    real = np.linalg.norm(segments[:, 1] - segments[:, 0], axis=1) > 0
    return segments[real], hit[real]


def thicknesses(section: Section, n_bodies: int) -> np.ndarray:
    """Return a measure of how thin every body is in the section: 2 area / perimeter, m; inf if absent."""
    area = np.bincount(section.cell_body, weights=np.abs(_area(section.points, section.cells)), minlength=n_bodies)
    edges, group = outline_edges(section.cells, section.cell_body)
    length = np.linalg.norm(np.diff(section.points[edges], axis=1)[:, 0], axis=1)
    perimeter = np.bincount(group, weights=length, minlength=n_bodies)
    return np.where(perimeter > 0, 2 * area / np.where(perimeter > 0, perimeter, 1.0), np.inf)
