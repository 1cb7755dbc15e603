"""A mesh with fewer cells for the viewer of a report.

Nodes are merged into a neighbour (half-edge collapse), many at once: every round draws nodes, no two in one cell, and
merges those round which the temperature is smoothest. All work of a round is on the cells round the nodes drawn. A merge
is made only if every cell it changes keeps a part of its volume and the volume of all of them together stays what it was,
and a node on a face between bodies or on a boundary goes only to a node on all of its planes. So no part changes its
shape, no name is lost, and what was a tiling stays one.
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
SMOOTHEST = 0.6
"""Part of the nodes that could be merged, the smoothest in temperature, that one round merges."""
CHOICES = 3
"""Times that candidates are drawn among the nodes with no candidate around them."""
TRIES = 4
"""Neighbours that a candidate tries, the nearest first."""
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
    planes = _planes_of_nodes(thin)
    free = ~_linked_nodes(mesh.links, mesh.n_nodes) & (planes.many <= 2)
    idle = 0
    for turn in range(MOST_ROUNDS):
        before = len(thin.cells)
        thin = _merge(thin, temperature, planes, free, before - most, turn)
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


def _merge(
    thin: Thinned, temperature: np.ndarray, planes: _Planes, free: np.ndarray, surplus: int, turn: int
) -> Thinned:
    """Return the mesh after one round of merges; node numbers stay those of the whole mesh."""
    cells, points = thin.cells, thin.points
    column = _apart(cells, free, turn)
    rows = np.flatnonzero(column >= 0)
    node = cells[rows, column[rows]]
    # Each row is a cell round its one candidate, which stands first.
    star = np.take_along_axis(cells[rows], (column[rows, None] + np.arange(4)) % 4, axis=1)
    # Turning four corners by one or three places is odd: two of the others change places so that volumes stay positive.
    odd = column[rows] % 2 == 1
    star[odd, 2], star[odd, 3] = star[odd, 3], star[odd, 2].copy()
    target = _targets(star, points, planes)
    nodes = np.flatnonzero(target >= 0)
    if not len(nodes):
        return thin
    rough = _roughness(star, points, temperature, target)[nodes]
    saved = np.bincount(node[(star[:, 1:] == target[node][:, None]).any(axis=1)], minlength=len(points))[nodes]
    order = np.argsort(rough, kind="stable")[: max(1, round(SMOOTHEST * len(nodes)))]
    order = order[: np.searchsorted(np.cumsum(saved[order]), surplus) + 1]
    move = np.arange(len(points))
    move[nodes[order]] = target[nodes[order]]
    kept = np.ones(len(cells), dtype=bool)
    kept[rows] = ~(star[:, 1:] == move[node][:, None]).any(axis=1)
    facets = move[thin.facets]
    whole = _distinct(facets)
    return replace(thin, cells=move[cells[kept]], body=thin.body[kept], flux=thin.flux[kept], facets=facets[whole],
                   facet_boundary=thin.facet_boundary[whole])  # fmt: skip


def _apart(cells: np.ndarray, free: np.ndarray, turn: int) -> np.ndarray:
    """Return which corner of each cell is a candidate, shape (m,), -1 for none: free nodes by chance, no two in a cell."""
    last = np.iinfo(np.int32).max
    rank = np.full(len(free), last, dtype=np.int32)
    nodes = np.flatnonzero(free)
    # By chance, always the same: by roughness, which varies evenly, few nodes would be first of all round them.
    rank[nodes] = np.random.default_rng(turn).permutation(len(nodes))
    around = np.bincount(cells.ravel(), minlength=len(free))
    chosen = np.full(len(free), False)
    for _ in range(CHOICES):
        ranked = rank[cells]
        best = cells[np.arange(len(cells)), ranked.argmin(axis=1)]
        new = (np.bincount(best, minlength=len(free)) == around) & (rank < last)
        chosen |= new
        rank[cells[new[cells].any(axis=1)]] = last
    held = chosen[cells]
    return np.where(held.any(axis=1), held.argmax(axis=1), -1)


def _targets(star: np.ndarray, points: np.ndarray, planes: _Planes) -> np.ndarray:
    """Return the nearest of its neighbours that each candidate can be merged into, shape (n,), -1 for none.

    ``star`` holds the cells round the candidates, each with its candidate first.
    """
    count = len(points)
    code = np.unique(np.repeat(star[:, 0].astype(np.int64), 3) * count + star[:, 1:].ravel())
    start, end = code // count, code % count
    allowed = planes.hold(start, end)
    start, end = start[allowed], end[allowed]
    order = np.lexsort((np.linalg.norm(points[start] - points[end], axis=1), start))
    start, end = start[order], end[order]
    first = np.flatnonzero(np.diff(start, prepend=-1))
    several = np.diff(first, append=len(start))
    found = np.full(count, -1)
    for turn in range(TRIES):
        left = (several > turn) & (found[start[first]] < 0)
        target = np.full(count, -1)
        target[start[first[left]]] = end[first[left] + turn]
        good = _stays_valid(star[target[star[:, 0]] >= 0], points, target)
        found[good] = target[good]
    return found


@dataclass(frozen=True, kw_only=True, eq=False)
class _Planes:
    """The planes of named faces that nodes lie on; merges leave them as they are.

    ``key`` is node * count + plane, ascending; a node's keys are the ``many`` from ``begin`` on.
    """

    key: np.ndarray
    count: int
    begin: np.ndarray
    many: np.ndarray

    def hold(self, start: np.ndarray, end: np.ndarray) -> np.ndarray:
        """Return which ends lie on all planes that their starts lie on (two at most)."""
        good = self.many[start] <= 2
        for turn in (0, 1):
            rows = np.flatnonzero(good & (self.many[start] > turn))
            wanted = end[rows] * self.count + self.key[self.begin[start[rows]] + turn] % self.count
            place = np.minimum(np.searchsorted(self.key, wanted), len(self.key) - 1)
            good[rows] = self.key[place] == wanted
        return good


def _planes_of_nodes(thin: Thinned) -> _Planes:
    triangles, label = _named_faces(thin)
    plane = _planes(thin.points, triangles, label)
    count = int(plane.max()) + 1
    key = np.unique(triangles.ravel().astype(np.int64) * count + np.repeat(plane, 3))
    begin = np.searchsorted(key // count, np.arange(len(thin.points) + 1))
    return _Planes(key=key, count=count, begin=begin[:-1], many=np.diff(begin))


def _named_faces(thin: Thinned) -> tuple[np.ndarray, np.ndarray]:
    """Return the triangles on boundaries and between bodies with a number for what they part."""
    shared = _shared_nodes(thin)
    faces, body = [], []
    for column in range(4):
        others = np.delete(thin.cells, column, axis=1)
        rows = shared[others].all(axis=1)
        faces.append(np.sort(others[rows], axis=1))
        body.append(thin.body[rows])
    faces, body = np.concatenate(faces), np.concatenate(body)
    order = np.lexsort((body, *faces.T[::-1]))
    faces, body = faces[order], body[order]
    twin = np.flatnonzero((faces[1:] == faces[:-1]).all(axis=1) & (body[1:] != body[:-1]))
    between = body[twin].astype(np.int64) * (thin.body.max() + 1) + body[twin + 1]
    label = np.concatenate([between, -1 - thin.facet_boundary.astype(np.int64)])
    return np.concatenate([faces[twin], np.sort(thin.facets, axis=1)]), label


def _shared_nodes(thin: Thinned) -> np.ndarray:
    """Return which nodes belong to more than one body, shape (n,)."""
    one = np.zeros(len(thin.points), dtype=thin.body.dtype)
    one[thin.cells] = thin.body[:, None]
    shared = np.zeros(len(thin.points), dtype=bool)
    shared[thin.cells[one[thin.cells] != thin.body[:, None]]] = True
    return shared


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


def _roughness(star: np.ndarray, points: np.ndarray, temperature: np.ndarray, target: np.ndarray) -> np.ndarray:
    """Return by how much the field bends between each candidate and its target, K, shape (n,): 0 where it is linear.

    The temperature at the node is held against that of its target plus the gradient of each cell at the node times the way;
    the worst cell counts.
    """
    star = star[target[star[:, 0]] >= 0]
    node, corner, value = star[:, 0], points[star], temperature[star]
    a, b, c = np.moveaxis(corner[:, 1:] - corner[:, :1], 1, 0)
    rise = value[:, 1:] - value[:, :1]
    across = rise[:, :1] * np.cross(b, c) + rise[:, 1:2] * np.cross(c, a) + rise[:, 2:] * np.cross(a, b)
    away, fall = points[node] - points[target[node]], temperature[node] - temperature[target[node]]
    bend = np.abs(fall - np.einsum("nd,nd->n", across, away) / np.einsum("nd,nd->n", np.cross(a, b), c))
    worst = np.zeros(len(points))
    np.maximum.at(worst, node, bend)
    return worst


def _stays_valid(star: np.ndarray, points: np.ndarray, target: np.ndarray) -> np.ndarray:
    """Return which merges leave positive cells that fill the space they filled before, shape (n,)."""
    count, node = len(points), star[:, 0]
    before = _volumes(points, star)
    gone = (star[:, 1:] == target[node][:, None]).any(axis=1)
    after = np.where(gone, 0.0, _volumes(points, np.column_stack([target[node], star[:, 1:]])))
    bad = np.zeros(count, dtype=bool)
    bad[node[~gone & (after < KEEPS * before)]] = True
    was, now = np.bincount(node, before, count), np.bincount(node, after, count)
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
