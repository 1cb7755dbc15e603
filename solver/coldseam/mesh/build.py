"""Make a :class:`Mesh` from bare arrays: orientation, exterior facets, frozen types."""

from __future__ import annotations

import numpy as np

from coldseam.mesh.counting import row_order
from coldseam.mesh.types import Mesh, MeshBody


def local_facets(dim: int) -> np.ndarray:
    """Return the local nodes of a simplex's facets, facet i opposite node i, outward oriented.

    Shape (dim + 1, dim).
    """
    if dim == 2:
        return np.array([[1, 2], [2, 0], [0, 1]])
    return np.array([[1, 2, 3], [0, 3, 2], [0, 1, 3], [0, 2, 1]])


def signed_measure(points: np.ndarray, cells: np.ndarray) -> np.ndarray:
    """Return the signed area or volume of every simplex, m² or m³, shape (n_cells,)."""
    edges = points[cells[:, 1:]] - points[cells[:, :1]]
    if points.shape[1] == 2:
        return 0.5 * (edges[:, 0, 0] * edges[:, 1, 1] - edges[:, 0, 1] * edges[:, 1, 0])
    (ax, ay, az), (bx, by, bz), (cx, cy, cz) = np.ascontiguousarray(edges.transpose(1, 2, 0))
    return (ax * (by * cz - bz * cy) + ay * (bz * cx - bx * cz) + az * (bx * cy - by * cx)) / 6.0


def number_facets(cells: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Number the facets of a simplex mesh once.

    Parameters
    ----------
    cells
        Shape (n_cells, dim + 1).

    Returns
    -------
    cell_facets
        Facet number opposite each local node, shape (n_cells, dim + 1).
    facets
        Sorted nodes of every facet, shape (n_facets, dim).
    """
    dim = cells.shape[1] - 1
    nodes = np.sort(cells[:, local_facets(dim)].reshape(-1, dim).astype(np.int32), axis=1)
    order = row_order(nodes, int(nodes.max()) + 1)
    ordered = nodes[order]
    first = np.ones(len(ordered), dtype=bool)
    first[1:] = np.any(ordered[1:] != ordered[:-1], axis=1)
    number = np.empty(len(ordered), dtype=np.int64)
    number[order] = np.cumsum(first) - 1
    return number.reshape(len(cells), dim + 1), ordered[first]


def build_mesh(
    points: np.ndarray,
    cells: np.ndarray,
    cell_body: np.ndarray,
    bodies: tuple[MeshBody, ...],
    *,
    patch_facets: np.ndarray | None = None,
    patch_of: np.ndarray | None = None,
    patch_groups: tuple[frozenset[str], ...] = (),
    axisymmetric: bool = False,
    quality: dict | None = None,
) -> Mesh:
    """Return a mesh with its exterior facets found and numbered by patch.

    Parameters
    ----------
    points, cells, cell_body, bodies
        As in :class:`Mesh`; cells of negative orientation are turned round.
    patch_facets, patch_of
        Facets (any node order), shape (n, dim), and their patch numbers, shape (n,); may include
        interior ones, which are dropped. Without them every exterior facet is a patch of its own.
    patch_groups
        Names each patch carries.

    Raises
    ------
    ValueError
        An exterior facet has no patch.
    """
    dim = points.shape[1]
    points = np.array(points, dtype=float)
    cells = np.array(cells, dtype=np.int64)
    negative = signed_measure(points, cells) < 0
    cells[negative, :2] = cells[negative, 1::-1]

    cell_facets, unique = number_facets(cells)
    count = np.bincount(cell_facets.ravel(), minlength=len(unique))
    owner, local = np.nonzero(count[cell_facets] == 1)
    facets = cells[owner[:, None], local_facets(dim)[local]]
    if axisymmetric:
        on_axis = np.all(points[facets][:, :, 0] <= 1e-9 * np.abs(points[:, 0]).max(), axis=1)
        owner, local, facets = owner[~on_axis], local[~on_axis], facets[~on_axis]

    if patch_facets is None:
        patch = np.arange(len(facets))
    else:
        patch = _match(np.sort(facets, axis=1), np.sort(patch_facets, axis=1), np.asarray(patch_of), len(points))
    return Mesh(
        points=points,
        cells=cells,
        cell_body=np.asarray(cell_body, dtype=np.int64).copy(),
        bodies=bodies,
        facets=facets,
        facet_cell=owner,
        facet_patch=patch,
        patch_groups=patch_groups,
        axisymmetric=axisymmetric,
        quality=quality or {},
    )


def _match(wanted: np.ndarray, known: np.ndarray, value: np.ndarray, n_nodes: int) -> np.ndarray:
    """Return ``value`` of the row of ``known`` equal to each row of ``wanted`` (both sorted rows)."""
    both = np.vstack([known, wanted])
    _, inverse = np.unique(both, axis=0, return_inverse=True)
    inverse = inverse.ravel()
    table = np.full(inverse.max() + 1, -1, dtype=np.int64)
    table[inverse[: len(known)]] = value
    found = table[inverse[len(known) :]]
    if np.any(found < 0):
        raise ValueError(f"{np.count_nonzero(found < 0)} exterior facets belong to no patch")
    return found
