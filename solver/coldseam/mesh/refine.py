"""Finer meshes by splitting cells: conforming, names kept, shapes bounded.

``refine`` bisects cells at their longest edge (Rivara 1984). An edge may be cut only when it is the
longest of *every* cell around it; where a cell that wants to be cut has a neighbour with a still longer edge,
that neighbour's edge is asked for first. Edges cut in one pass share no cell (each cell has one
longest edge, ties broken by node number), so a pass is plain array work and every pass ends with a
conforming mesh. The longest edge asked for can always be cut, so it ends.

``uniform`` cuts every edge: 4 triangles, or 8 tetrahedra by Bey's rule, which keeps an ordering of the
nodes from which at most three shapes per original tetrahedron arise, however often it is repeated.

Bodies, patches and their groups carry over to the pieces; midpoints are put on the straight edges, so volumes
and areas stay what they were.

Rivara, "Algorithms for refining triangular grids ...", Int. J. Numer. Meth. Engng 20 (1984) 745-756;
Bey, "Tetrahedral grid refinement", Computing 55 (1995) 355-378 (both from memory).
"""

from __future__ import annotations

import numpy as np

from coldseam.mesh.build import build_mesh
from coldseam.mesh.surface import components
from coldseam.mesh.types import Mesh

SPLIT_ABOVE = 1.15
"""A cell is cut while its mean edge is longer than this times the wanted size: a cut takes the mean edge
of a regular simplex to about 0.8, so the mean edges end between 0.9 and 1.15, around 1."""

BEY = np.array(
    [
        [[0, 0], [0, 1], [0, 2], [0, 3]],
        [[0, 1], [1, 1], [1, 2], [1, 3]],
        [[0, 2], [1, 2], [2, 2], [2, 3]],
        [[0, 3], [1, 3], [2, 3], [3, 3]],
        [[0, 1], [0, 2], [0, 3], [1, 3]],
        [[1, 2], [0, 2], [0, 1], [1, 3]],
        [[0, 2], [0, 3], [1, 3], [2, 3]],
        [[1, 3], [1, 2], [0, 2], [2, 3]],
    ]
)
"""Bey's eight children; each child's node is the midpoint of a pair of the parent's (a pair of one node is that node).

The sixth and eighth have their first and third nodes changed over, which makes them positive; the cut
of a child's inner octahedron depends only on the pairs {0, 2} and {1, 3}, which that leaves alone.
"""

FOUR = np.array(
    [
        [[0, 0], [0, 1], [0, 2]],
        [[0, 1], [1, 1], [1, 2]],
        [[0, 2], [1, 2], [2, 2]],
        [[0, 1], [1, 2], [0, 2]],
    ]
)
TWO = np.array([[[0, 0], [0, 1]], [[0, 1], [1, 1]]])


def uniform(mesh: Mesh) -> Mesh:
    """Return the mesh with every edge halved: 4 triangles for one, 8 tetrahedra for one.

    Contacts are closed up again (their doubled nodes joined), as in :func:`refine`.
    """
    mesh, _ = joined(mesh)
    first, second = np.triu_indices(mesh.dim + 1, 1)
    edges = np.unique(_keys(mesh.cells[:, first], mesh.cells[:, second], mesh.n_nodes))
    start, end = edges // mesh.n_nodes, edges % mesh.n_nodes
    points = np.vstack([mesh.points, 0.5 * (mesh.points[start] + mesh.points[end])])

    def pieces(elements: np.ndarray, rule: np.ndarray) -> np.ndarray:
        a, b = elements[:, rule[..., 0]], elements[:, rule[..., 1]]
        middle = mesh.n_nodes + np.searchsorted(edges, _keys(a, b, mesh.n_nodes))
        return np.where(rule[..., 0] == rule[..., 1], a, middle).reshape(-1, elements.shape[1])

    cells = pieces(mesh.cells, BEY if mesh.dim == 3 else FOUR)
    facets = pieces(mesh.facets, FOUR if mesh.dim == 3 else TWO)
    per_cell, per_facet = 2**mesh.dim, 2 ** (mesh.dim - 1)
    body, patch = np.repeat(mesh.cell_body, per_cell), np.repeat(mesh.facet_patch, per_facet)
    return _finished(mesh, points, cells, body, facets, patch)


def refine(mesh: Mesh, size: np.ndarray) -> Mesh:
    """Return the mesh with cells cut until none is larger than wanted.

    Parameters
    ----------
    mesh
        Where contacts have doubled its nodes they are joined again, so that both sides are cut alike; the
        result has no ``links``.
    size
        Wanted mean edge length at the nodes, m, shape (n_nodes,). Cells are never made coarser.

    Raises
    ------
    ValueError
        A size is not positive, or their number is not that of the nodes.
    """
    size = np.asarray(size, dtype=float)
    if size.shape != (mesh.n_nodes,) or not np.all(size > 0):
        raise ValueError(f"size must hold a positive number for each of {mesh.n_nodes} nodes")
    mesh, lead = joined(mesh)
    merged = np.full(mesh.n_nodes, np.inf)
    np.minimum.at(merged, lead, size)
    work = _Bisection(mesh, merged)
    while work.cut():
        pass
    return _finished(mesh, work.points, work.cells, work.body, work.facets, work.patch)


def within_budget(mesh: Mesh, size: np.ndarray, target_cells: int) -> np.ndarray:
    """Return the sizes scaled up so that about ``target_cells`` cells result, shape (n_nodes,)."""
    wanted = np.asarray(size, dtype=float)[mesh.cells].mean(axis=1)
    ratio = _mean_edge(mesh.points, mesh.cells) / wanted

    def expected(scale: float) -> float:
        return float(np.sum(np.maximum(ratio / scale, 1.0) ** mesh.dim))

    low, high = 1.0, max(float(ratio.max()), 1.0)
    if expected(low) <= target_cells:
        return np.asarray(size, dtype=float)
    for _ in range(40):
        middle = np.sqrt(low * high)
        low, high = (middle, high) if expected(middle) > target_cells else (low, middle)
    return np.asarray(size, dtype=float) * high


def joined(mesh: Mesh) -> tuple[Mesh, np.ndarray]:
    """Return the mesh with the two sides of contacts joined, and the new number of every node.

    A mesh without contacts comes back as it is.
    """
    if mesh.links is None or not len(mesh.links):
        return mesh, np.arange(mesh.n_nodes)
    pairs = np.column_stack([mesh.links[:, 0].ravel(), mesh.links[:, 1].ravel()])
    _, lead = components(pairs, mesh.n_nodes)
    _, first = np.unique(lead, return_index=True)
    points, cells, facets = mesh.points[first], lead[mesh.cells], lead[mesh.facets]
    return _finished(mesh, points, cells, mesh.cell_body, facets, mesh.facet_patch), lead


def _finished(
    mesh: Mesh, points: np.ndarray, cells: np.ndarray, body: np.ndarray, facets: np.ndarray, patch: np.ndarray
) -> Mesh:
    return build_mesh(
        points,
        cells,
        body,
        mesh.bodies,
        patch_facets=facets,
        patch_of=patch,
        patch_groups=mesh.patch_groups,
        axisymmetric=mesh.axisymmetric,
        quality=dict(mesh.quality),
    )


def _keys(a: np.ndarray, b: np.ndarray, n_nodes: int) -> np.ndarray:
    """Return one number per pair of nodes, the same either way round."""
    return np.minimum(a, b) * np.int64(n_nodes) + np.maximum(a, b)


def _mean_edge(points: np.ndarray, cells: np.ndarray) -> np.ndarray:
    first, second = np.triu_indices(cells.shape[1], 1)
    return np.linalg.norm(points[cells[:, first]] - points[cells[:, second]], axis=2).mean(axis=1)


class _Bisection:
    """The state of a refinement: arrays that grow pass by pass."""

    def __init__(self, mesh: Mesh, size: np.ndarray):
        self.points, self.size = np.array(mesh.points), size
        self.cells, self.body = np.array(mesh.cells), np.array(mesh.cell_body)
        self.facets, self.patch = np.array(mesh.facets), np.array(mesh.facet_patch)
        self.start, self.end, self.mean = self._longest(self.cells)

    def _longest(self, cells: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Return the ends of the longest edge of cells, smaller number first, and their mean edge length."""
        first, second = np.triu_indices(cells.shape[1], 1)
        a, b = cells[:, first], cells[:, second]
        a, b = np.minimum(a, b), np.maximum(a, b)
        length = np.linalg.norm(self.points[a] - self.points[b], axis=2)
        # Equal lengths are ties, broken by node numbers: an edge then ranks the same in every cell around it.
        tied = length == length.max(axis=1, keepdims=True)
        rank = np.argmax(np.where(tied, _keys(a, b, len(self.points)), -1), axis=1)
        rows = np.arange(len(cells))
        return a[rows, rank], b[rows, rank], length.mean(axis=1)

    def cut(self) -> bool:
        """Cut all edges that can be cut now; return False when no cell is too large."""
        wanted = self.size[self.cells].mean(axis=1)
        ask = self.mean > SPLIT_ABOVE * wanted
        if not ask.any():
            return False
        n = len(self.points)
        edges = self._cuttable(np.unique(_keys(self.start[ask], self.end[ask], n)))
        a, b = edges // n, edges % n
        self.points = np.vstack([self.points, 0.5 * (self.points[a] + self.points[b])])
        self.size = np.concatenate([self.size, 0.5 * (self.size[a] + self.size[b])])
        self._cut_cells(edges, n)
        row, edge = _containing(self.facets, edges, n)
        left, right = _halves(self.facets[row], edges[edge], n, n + edge)
        self.facets[row] = left
        self.facets = np.vstack([self.facets, right])
        self.patch = np.concatenate([self.patch, self.patch[row]])
        return True

    def _cut_cells(self, edges: np.ndarray, n: int) -> None:
        at, found = _find(_keys(self.start, self.end, n), edges)
        row = np.flatnonzero(found)
        left, right = _halves(self.cells[row], edges[at[row]], n, n + at[row])
        self.cells[row] = left
        self.cells = np.vstack([self.cells, right])
        self.body = np.concatenate([self.body, self.body[row]])
        for name, old, new in zip(("start", "end", "mean"), self._longest(left), self._longest(right), strict=True):
            values = getattr(self, name)
            values[row] = old
            setattr(self, name, np.concatenate([values, new]))

    def _cuttable(self, asked: np.ndarray) -> np.ndarray:
        """Return, of the edges asked for and those that must go first, the ones longest in all their cells."""
        n = len(self.points)
        while True:
            row, edge = _containing(self.cells, asked, n)
            own = _keys(self.start[row], self.end[row], n)
            grown = np.union1d(asked, own)
            if len(grown) == len(asked):
                blocked = np.zeros(len(asked), dtype=bool)
                blocked[edge[own != asked[edge]]] = True
                return asked[~blocked]
            asked = grown


def _find(keys: np.ndarray, ordered: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return the position of keys in a sorted array, and whether they are in it."""
    at = np.searchsorted(ordered, keys).clip(max=len(ordered) - 1)
    return at, ordered[at] == keys


def _containing(elements: np.ndarray, edges: np.ndarray, n: int) -> tuple[np.ndarray, np.ndarray]:
    """Return pairs (element, position in ``edges``) for all of the edges that elements have."""
    touched = np.zeros(n, dtype=bool)
    touched[edges // n] = True
    touched[edges % n] = True
    some = np.flatnonzero(np.count_nonzero(touched[elements], axis=1) >= 2)
    first, second = np.triu_indices(elements.shape[1], 1)
    at, found = _find(_keys(elements[some][:, first], elements[some][:, second], n), edges)
    row, column = np.nonzero(found)
    return some[row], at[row, column]


def _halves(elements: np.ndarray, edges: np.ndarray, n: int, middle: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return the two halves of elements cut at an edge of each; orientation is kept."""
    start, end, new = (edges // n)[:, None], (edges % n)[:, None], middle[:, None]
    return np.where(elements == end, new, elements), np.where(elements == start, new, elements)
