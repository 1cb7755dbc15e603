"""The conduction operator of the vertex-centred finite volumes, assembled without a loop over cells.

On a simplex c with linear temperature the heat that flows from node i to node j through the face
of their median-dual control volumes is ``k_c w_cij (T_i - T_j)`` with

    w_cij = - |c| grad(lambda_i) . K grad(lambda_j)

(lambda the barycentric coordinates, K the unit conductivity tensor of the body, k_c the scalar
conductivity). Summed over the cells around an edge e = (i, j) this is one conductance

    g_e = sum_c P_ec k_c

and the matrix is the weighted graph Laplacian of the mesh edges: symmetric, zero row sums, equal to
the linear-element stiffness matrix (Bank, Rose 1987, SIAM J. Numer. Anal. 24, 777). P is sparse,
(edges x cells), and built once; new conductivities cost one product.

In an axisymmetric section every weight carries ``2 pi r_c``, r_c the radius of the cell's centroid,
which integrates the constant gradients exactly over the whole turn.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import sparse

from coldseam.mesh.counting import counting_order, pair_order
from coldseam.mesh.types import Mesh

CHUNK = 16_000  # cells handled at once: the intermediate arrays stay in the processor's cache
_PAIRS = {2: ((0, 1), (0, 2), (1, 2)), 3: ((0, 1), (0, 2), (0, 3), (1, 2), (1, 3), (2, 3))}


@dataclass(frozen=True, kw_only=True, eq=False)
class EdgeOperator:
    """Edges of a mesh and what turns cell conductivities into a matrix.

    Parameters
    ----------
    edges
        Node pairs, lower node first, sorted, shape (n_edges, 2).
    weights
        P of the module text, m (3D, axisymmetric) or dimensionless (2D), shape (n_edges, n_cells).
    indptr, indices, order
        The CSR pattern of the matrix, and where each entry is found in
        ``[-g, -g, diagonal]``.
    """

    edges: np.ndarray
    weights: sparse.csr_array
    indptr: np.ndarray
    indices: np.ndarray
    order: np.ndarray

    def conductances(self, conductivity: np.ndarray) -> np.ndarray:
        """Return every edge's conductance, W/K (2D: W/(m K)), from conductivities (n_cells,) in W/(m K)."""
        return self.weights @ conductivity

    def matrix(self, conductivity: np.ndarray) -> sparse.csr_array:
        """Return the (n_nodes, n_nodes) conduction matrix, W/K (2D: W/(m K))."""
        g = self.conductances(conductivity)
        n = len(self.indptr) - 1
        diagonal = np.bincount(self.edges[:, 0], g, n) + np.bincount(self.edges[:, 1], g, n)
        data = np.concatenate([-g, -g, diagonal])[self.order]
        return sparse.csr_array((data, self.indices, self.indptr), shape=(n, n))


def cell_pairs(dim: int) -> np.ndarray:
    """Return the local node pairs of a simplex in the order of the weights, shape (3 or 6, 2)."""
    return np.array(_PAIRS[dim])


def cell_weights(
    mesh: Mesh,
    tensors: np.ndarray | None = None,
    scale: np.ndarray | None = None,
    tensor_of: np.ndarray | None = None,
) -> np.ndarray:
    """Return the edge weights w_cij of every cell.

    Parameters
    ----------
    mesh
        Triangles or tetrahedra.
    tensors
        Unit conductivity tensor of every body, shape (n_bodies, dim, dim); None when all are isotropic.
    scale
        A factor for every cell, shape (n_cells,), for the turn of an axisymmetric section.
    tensor_of
        Which of the tensors every cell has, shape (n_cells,); that of its body if not given.

    Returns
    -------
    weights
        Shape (3 or 6, n_cells): one row for every pair of :func:`cell_pairs`.
    """
    kernel = _triangle_weights if mesh.dim == 2 else _tetrahedron_weights
    weights = np.empty((len(_PAIRS[mesh.dim]), mesh.n_cells))
    coordinates = np.ascontiguousarray(mesh.points.T)
    tensor_of = mesh.cell_body if tensor_of is None else tensor_of
    for start in range(0, mesh.n_cells, CHUNK):  # a loop over chunks, not over cells
        part = slice(start, min(start + CHUNK, mesh.n_cells))
        corners = np.take(coordinates, np.ascontiguousarray(mesh.cells[part].T), axis=1)
        tensor = None if tensors is None else np.moveaxis(tensors[tensor_of[part]], 0, -1)
        kernel(corners, tensor, weights[:, part])
    if scale is not None:
        weights *= scale
    return weights


def _triangle_weights(p, tensor, out):
    """Write w for corner coordinates p (2, 3, n): opposite edge vectors turned by 90° are 2|c| grad(lambda)."""
    gx = np.stack([p[1, 1] - p[1, 2], p[1, 2] - p[1, 0], p[1, 0] - p[1, 1]])
    gy = np.stack([p[0, 2] - p[0, 1], p[0, 0] - p[0, 2], p[0, 1] - p[0, 0]])
    twice_area = gx[1] * gy[2] - gx[2] * gy[1]
    if tensor is None:
        hx, hy = gx, gy
    else:
        hx, hy = tensor[0, 0] * gx + tensor[0, 1] * gy, tensor[1, 0] * gx + tensor[1, 1] * gy
    for row, (i, j) in enumerate(_PAIRS[2]):
        out[row] = -(gx[i] * hx[j] + gy[i] * hy[j]) / (2.0 * twice_area)


def _tetrahedron_weights(p, tensor, out):
    """Write w for corner coordinates p (3, 4, n): 6|c| grad(lambda_1) = e2 x e3 and so on, e_i = p_i - p_0."""
    e1, e2, e3 = (p[:, i] - p[:, 0] for i in (1, 2, 3))
    c1, c2, c3 = _cross(e2, e3), _cross(e3, e1), _cross(e1, e2)
    factor = -1.0 / (6.0 * (e1[0] * c1[0] + e1[1] * c1[1] + e1[2] * c1[2]))
    if tensor is None:
        d1, d2, d3 = c1, c2, c3
    else:
        d1, d2, d3 = (np.stack([sum(tensor[a, b] * c[b] for b in range(3)) for a in range(3)]) for c in (c1, c2, c3))
    s12, s13, s23 = _dot(c1, d2), _dot(c1, d3), _dot(c2, d3)
    s11, s22, s33 = _dot(c1, d1), _dot(c2, d2), _dot(c3, d3)
    out[0] = -(s11 + s12 + s13) * factor
    out[1] = -(s12 + s22 + s23) * factor
    out[2] = -(s13 + s23 + s33) * factor
    out[3] = s12 * factor
    out[4] = s13 * factor
    out[5] = s23 * factor


def _cross(a, b):
    return np.stack([a[1] * b[2] - a[2] * b[1], a[2] * b[0] - a[0] * b[2], a[0] * b[1] - a[1] * b[0]])


def _dot(a, b):
    return a[0] * b[0] + a[1] * b[1] + a[2] * b[2]


def edge_operator(mesh: Mesh, weights: np.ndarray) -> EdgeOperator:
    """Number the edges of a mesh once and gather its cells' weights into P.

    Parameters
    ----------
    mesh
        The mesh.
    weights
        From :func:`cell_weights`, shape (3 or 6, n_cells).
    """
    n, n_cells = mesh.n_nodes, np.int32(mesh.n_cells)
    cells = mesh.cells.astype(np.int32)
    near = counting_order(cells.min(axis=1), n)  # in the nodes' order the sorts run through memory, not across it
    cells = np.take(cells, near, axis=0)
    pairs = cell_pairs(mesh.dim)
    first, second = cells[:, pairs[:, 0]].T.ravel(), cells[:, pairs[:, 1]].T.ravel()
    place = (np.arange(len(pairs), dtype=np.int32)[:, None] * n_cells + near).ravel()
    place, high, start = pair_order(np.minimum(first, second), np.maximum(first, second), n, place)

    new = np.empty(len(high), dtype=bool)
    np.not_equal(high[1:], high[:-1], out=new[1:])
    new[start[:-1][start[:-1] < start[1:]]] = True
    starts = np.flatnonzero(new).astype(np.int32)
    low = np.repeat(np.arange(n, dtype=np.int32), np.diff(start))
    edges = np.column_stack([np.take(low, starts), np.take(high, starts)])

    indptr = np.append(starts, np.int32(len(high)))
    cell = place - place // n_cells * n_cells  # the remainder, in numpy's vectorised operations
    gathered = sparse.csr_array((np.take(weights, place), cell, indptr), shape=(len(edges), mesh.n_cells))
    return EdgeOperator(edges=edges, weights=gathered, **_pattern(edges, n))


def _pattern(edges: np.ndarray, n: int) -> dict[str, np.ndarray]:
    """Return the CSR pattern of a graph Laplacian and the source of every entry."""
    nodes = np.arange(n, dtype=np.int32)
    rows = np.concatenate([edges[:, 0], edges[:, 1], nodes])
    columns = np.concatenate([edges[:, 1], edges[:, 0], nodes])
    order, indices, indptr = pair_order(rows, columns, n, np.arange(len(rows), dtype=np.int32))
    return {"indptr": indptr, "indices": indices, "order": order}
