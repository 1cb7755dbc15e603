"""A mesh with fewer cells for the viewer of a report.

Nodes are merged into a neighbour (half-edge collapse), many at once: in every round from among those round which the
temperature is smoothest, no two in one cell. A merge is made only if every cell it changes keeps a part of its
volume and the volume of all of them together stays what it was, and a node on a face between bodies or on a
boundary goes only to a node on all of its planes. So no part changes its shape, no name is lost, and what was a tiling stays one.
The temperatures kept are those solved; the largest difference at the nodes left out is measured and told.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from scipy.spatial import cKDTree

from coldseam.report.view import View

MOST_CELLS = 400_000
MOST_ROUNDS = 40
LEAST_GAIN = 0.01
"""Part of the cells that a round must save; after ``PATIENCE`` rounds that save less no more follow."""
PATIENCE = 3
SMOOTHEST = 0.4
"""Part of the nodes that could be merged, the smoothest in temperature, that one round considers."""
KEEPS = 0.05
"""Part of its volume that a changed cell must keep."""
NEAR = (24, 400)
"""Cells tried around each node left out when the difference is measured: first few, many where none of those holds it."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Thinned:
    """A mesh with the field that it carries, perhaps coarser than that of the solution.

    Parameters
    ----------
    node
        The node of the whole mesh that each node is, shape (n,).
    points
        m, shape (n, dim).
    cells, body, flux
        Corners, body and size of the heat flux (W/m²) of the cells, shapes (m, dim + 1), (m,), (m,).
    facets, facet_cell, facet_boundary
        Exterior facets, the cells behind them and their boundaries, shapes (f, dim), (f,), (f,).
    whole
        Cells of the whole mesh.
    error
        Largest difference of temperature to the whole mesh, K; 0 where nothing was left out.
    """

    node: np.ndarray
    points: np.ndarray
    cells: np.ndarray
    body: np.ndarray
    flux: np.ndarray
    facets: np.ndarray
    facet_cell: np.ndarray
    facet_boundary: np.ndarray
    whole: int
    error: float = 0.0


def thinned(view: View, most: int = MOST_CELLS) -> Thinned:
    """Return the mesh of a result with about ``most`` cells, or as few as its faces permit."""
    mesh = view.mesh
    flux = np.zeros(mesh.n_cells) if view.cell_flux is None else np.linalg.norm(view.cell_flux, axis=1)
    thin = Thinned(
        node=np.arange(mesh.n_nodes), points=mesh.points, cells=mesh.cells, body=mesh.cell_body, flux=flux,
        facets=mesh.facets, facet_cell=mesh.facet_cell, facet_boundary=view.facet_boundary, whole=mesh.n_cells,
    )  # fmt: skip
    if mesh.dim == 2 or mesh.n_cells <= most:
        return thin
    temperature = np.asarray(view.temperature, dtype=float)
    fixed = _linked_nodes(mesh.links, mesh.n_nodes)
    idle = 0
    for turn in range(MOST_ROUNDS):
        before = len(thin.cells)
        thin = _merge(thin, temperature, fixed, before - most, turn)
        idle = idle + 1 if len(thin.cells) > (1 - LEAST_GAIN) * before else 0
        if len(thin.cells) <= most or idle == PATIENCE:
            break
    return _compact(thin, mesh.points, temperature)


def _linked_nodes(links: np.ndarray | None, count: int) -> np.ndarray:
    """Return which nodes lie on contacts: they have twins and stay."""
    fixed = np.zeros(count, dtype=bool)
    if links is not None:
        fixed[np.unique(links)] = True
    return fixed


def _merge(thin: Thinned, temperature: np.ndarray, fixed: np.ndarray, surplus: int, turn: int) -> Thinned:
    """Return the mesh after one round of merges; node numbers stay those of the whole mesh.

    A node tries one neighbour a round, the nearest first, the next nearest in the next ``turn``.
    """
    cells, points = thin.cells, thin.points
    start, end = _edges(cells)
    allowed = _on_all_planes(thin, start, end) & ~fixed[start]
    start, end = start[allowed], end[allowed]
    length = np.linalg.norm(points[start] - points[end], axis=1)
    order = np.lexsort((end, length, start))
    start, end = start[order], end[order]
    first = np.flatnonzero(np.diff(start, prepend=-1))
    several = np.diff(first, append=len(start))
    target = np.full(len(points), -1)
    target[start[first]] = end[first + turn % np.maximum(several, 1)]
    rank = np.full(len(points), np.iinfo(np.int64).max)
    nodes = np.flatnonzero(_stays_valid(cells, points, target))
    rough = _roughness(cells, points, temperature, target)[nodes]
    smooth = rough <= np.quantile(rough, SMOOTHEST) if len(nodes) else np.zeros(0, dtype=bool)
    nodes = nodes[smooth]
    # Ranked by chance, always the same: ranked by roughness, which varies evenly, few nodes would be first of all round them.
    rank[nodes] = np.random.default_rng(turn).permutation(len(nodes))
    chosen = _apart(cells, rank, len(points)) & (rank < np.iinfo(np.int64).max)
    nodes = np.flatnonzero(chosen)
    nodes = nodes[np.argsort(rank[nodes])][: max(1, surplus // 4)]  # a merge saves some five cells
    move = np.arange(len(points))
    move[nodes] = target[nodes]
    kept = _distinct(move[cells])
    facets = move[thin.facets]
    whole = _distinct(facets)
    return replace(thin, cells=move[cells][kept], body=thin.body[kept], flux=thin.flux[kept], facets=facets[whole],
                   facet_boundary=thin.facet_boundary[whole])  # fmt: skip


def _edges(cells: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return all edges of tetrahedra in both directions."""
    pairs = np.concatenate([cells[:, [i, j]] for i in range(4) for j in range(4) if i != j])
    count = int(cells.max()) + 1
    code = np.unique(pairs[:, 0].astype(np.int64) * count + pairs[:, 1])
    return code // count, code % count


def _on_all_planes(thin: Thinned, start: np.ndarray, end: np.ndarray) -> np.ndarray:
    """Return which edges lead to a node on all planes of named faces that their start lies on."""
    triangles, label = _named_faces(thin)
    plane = _planes(thin.points, triangles, label)
    count = int(plane.max()) + 1
    key = np.unique(triangles.ravel().astype(np.int64) * count + np.repeat(plane, 3))
    node, plane = key // count, key % count
    begin = np.searchsorted(node, np.arange(len(thin.points) + 1))
    many = np.diff(begin)
    good = many[start] <= 2
    for turn in (0, 1):
        rows = np.flatnonzero(good & (many[start] > turn))
        wanted = end[rows].astype(np.int64) * count + plane[begin[start[rows]] + turn]
        place = np.minimum(np.searchsorted(key, wanted), len(key) - 1)
        good[rows] = key[place] == wanted
    return good


def _named_faces(thin: Thinned) -> tuple[np.ndarray, np.ndarray]:
    """Return the triangles on boundaries and between bodies with a number for what they part."""
    faces = np.sort(np.concatenate([np.delete(thin.cells, k, axis=1) for k in range(4)]), axis=1)
    body = np.tile(thin.body, 4)
    order = np.lexsort((body, *faces.T[::-1]))
    faces, body = faces[order], body[order]
    twin = np.flatnonzero((faces[1:] == faces[:-1]).all(axis=1) & (body[1:] != body[:-1]))
    between = body[twin].astype(np.int64) * (thin.body.max() + 1) + body[twin + 1]
    label = np.concatenate([between, -1 - thin.facet_boundary.astype(np.int64)])
    return np.concatenate([faces[twin], np.sort(thin.facets, axis=1)]), label


def _planes(points: np.ndarray, triangles: np.ndarray, label: np.ndarray) -> np.ndarray:
    """Return a number for the plane and the label of each triangle, shape (n,)."""
    corner = points[triangles]
    normal = np.cross(corner[:, 1] - corner[:, 0], corner[:, 2] - corner[:, 0])
    normal /= np.maximum(np.linalg.norm(normal, axis=1, keepdims=True), 1e-300)
    lead = np.take_along_axis(normal, np.abs(normal).round(6).argmax(axis=1)[:, None], axis=1)
    normal *= np.where(lead < 0, -1.0, 1.0)
    offset = np.einsum("nd,nd->n", normal, corner[:, 0]) / np.ptp(points, axis=0).max()
    rows = np.column_stack([np.rint(normal * 1e4), np.rint(offset * 1e6), label]) + 0.0
    return np.unique(rows, axis=0, return_inverse=True)[1].ravel()


def _roughness(cells: np.ndarray, points: np.ndarray, temperature: np.ndarray, target: np.ndarray) -> np.ndarray:
    """Return by how much the field bends between each node and its target, K, shape (n,): 0 where it is linear.

    The temperature at the node is held against that of its target plus the gradient of each cell at the node times the way;
    the worst cell counts.
    """
    corner, value = points[cells], temperature[cells]
    edge, rise = corner[:, 1:] - corner[:, :1], value[:, 1:] - value[:, :1]
    gradient = np.linalg.solve(edge, rise[:, :, None])[:, :, 0]
    away, fall = points - points[target], temperature - temperature[target]
    worst = np.zeros(len(points))
    for column in range(4):
        node = cells[:, column]
        np.maximum.at(worst, node, np.abs(fall[node] - np.einsum("nd,nd->n", gradient, away[node])))
    return worst


def _apart(cells: np.ndarray, rank: np.ndarray, count: int) -> np.ndarray:
    """Return which nodes rank before all nodes that they share a cell with, shape (n,)."""
    best = np.take_along_axis(cells, rank[cells].argmin(axis=1)[:, None], axis=1)[:, 0]
    return np.bincount(best, minlength=count) == np.bincount(cells.ravel(), minlength=count)


def _stays_valid(cells: np.ndarray, points: np.ndarray, target: np.ndarray) -> np.ndarray:
    """Return which merges leave positive cells that fill the space they filled before, each by itself, shape (n,)."""
    count, before = len(points), _volumes(points, cells)
    bad, was, now = np.zeros(count, dtype=bool), np.zeros(count), np.zeros(count)
    for column in range(4):
        node = cells[:, column]
        rows = np.flatnonzero(target[node] >= 0)
        node = node[rows]
        new = cells[rows]
        gone = (new == target[node][:, None]).any(axis=1)
        new[:, column] = target[node]
        after = np.where(gone, 0.0, _volumes(points, new))
        bad[node[~gone & (after < KEEPS * before[rows])]] = True
        was += np.bincount(node, before[rows], count)
        now += np.bincount(node, after, count)
    return (target >= 0) & ~bad & (np.abs(now - was) <= 1e-6 * was)


def _volumes(points: np.ndarray, cells: np.ndarray) -> np.ndarray:
    corner = points[cells]
    edge = corner[:, 1:] - corner[:, :1]
    return np.einsum("nd,nd->n", np.cross(edge[:, 0], edge[:, 1]), edge[:, 2]) / 6.0


def _distinct(rows: np.ndarray) -> np.ndarray:
    """Return which rows of node numbers name no node twice."""
    ordered = np.sort(rows, axis=1)
    return (ordered[:, 1:] != ordered[:, :-1]).all(axis=1)


def _compact(thin: Thinned, points: np.ndarray, temperature: np.ndarray) -> Thinned:
    """Return the mesh with its own node numbers, the cells behind its facets and the measured difference."""
    kept, cells = np.unique(thin.cells, return_inverse=True)
    cells = cells.reshape(thin.cells.shape)
    facets = np.searchsorted(kept, thin.facets)
    count = np.int64(len(kept))
    code = _code(np.concatenate([np.delete(cells, k, axis=1) for k in range(4)]), count)
    order = np.argsort(code, kind="stable")
    place = order[np.searchsorted(code[order], _code(facets, count))]
    out = np.setdiff1d(np.arange(len(points)), kept)
    error = _difference(points[kept], cells, temperature[kept], points[out], temperature[out])
    return replace(thin, node=kept, points=points[kept], cells=cells, facets=facets, facet_cell=place % len(cells),
                   error=error)  # fmt: skip


def _code(triangles: np.ndarray, count: np.int64) -> np.ndarray:
    rows = np.sort(triangles, axis=1).astype(np.int64)
    return (rows[:, 0] * count + rows[:, 1]) * count + rows[:, 2]


def _difference(points, cells, temperature, places, solved) -> float:
    """Return the largest difference between the field of a mesh and values solved at places in it, K."""
    corner = points[cells]
    tree = cKDTree(corner.mean(axis=1))
    matrix = np.linalg.inv(np.swapaxes(corner[:, 1:] - corner[:, :1], 1, 2))
    worst, left = 0.0, np.arange(len(places))
    for near in NEAR if len(places) else ():
        missed = []
        for part in np.array_split(left, max(1, len(left) * near // 400_000)):
            weight, cell = _inside(tree, corner, matrix, places[part], min(near, len(cells)))
            held = weight.min(axis=1) > -1e-3
            missed.append(part[~held])
            counts = held if near != NEAR[-1] else np.ones(len(part), dtype=bool)
            weight = np.clip(weight, 0.0, None)
            found = (weight / weight.sum(axis=1, keepdims=True) * temperature[cells[cell]]).sum(axis=1)
            worst = max(worst, float(np.abs(found - solved[part])[counts].max(initial=0.0)))
        left = np.concatenate(missed)
        if not len(left):
            break
    return worst


def _inside(tree, corner, matrix, places, count: int) -> tuple[np.ndarray, np.ndarray]:
    """Return barycentric coordinates, (n, 4), in that of the nearest cells that each place lies best in, and the cell, (n,)."""
    near = tree.query(places, k=count)[1].reshape(len(places), -1)
    inner = np.einsum("nkij,nkj->nki", matrix[near], places[:, None] - corner[near, 0])
    weight = np.concatenate([1.0 - inner.sum(axis=2, keepdims=True), inner], axis=2)
    best, rows = weight.min(axis=2).argmax(axis=1), np.arange(len(near))
    return weight[rows, best], near[rows, best]
