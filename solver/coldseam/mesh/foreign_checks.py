"""Defects of foreign meshes that would falsify heat flows, each an error with its count and place."""

from __future__ import annotations

import numpy as np
from scipy.spatial import cKDTree

from coldseam.mesh.build import local_facets, number_facets, signed_measure
from coldseam.mesh.faces import mm
from coldseam.mesh.foreign_read import mesh_fault
from coldseam.mesh.measure import facet_normals
from coldseam.mesh.surface import facet_neighbours
from coldseam.mesh.types import Mesh

COINCIDENT = 1e-8
"""Of the mesh's size: files written with 8 digits or more keep separate nodes apart (common practice, no source)."""
FLAT = 1e-10
"""Of the longest edge to the power of the dimension: below, a cell's shape is rounding error."""


def _at(place: np.ndarray) -> str:
    return "(" + ", ".join(mm(part) for part in place) + ") mm"


def check_nodes(points: np.ndarray) -> None:
    """Refuse nodes, m, shape (n_nodes, dim), on top of each other: a crack there that no heat would cross.

    Raises
    ------
    CaseError
    """
    near = cKDTree(points).query_pairs(COINCIDENT * np.linalg.norm(np.ptp(points, axis=0)), output_type="ndarray")
    if len(near):
        what = f"{len(near)} pairs of nodes lie on top of each other, the first at {_at(points[near[0, 0]])}: "
        raise mesh_fault(what + "the mesh is not joined there and no heat would cross; merge doubled nodes in the file")


def check_simplices(points: np.ndarray, cells: np.ndarray) -> int:
    """Refuse flat, doubled and folded cells and facets of more than two cells.

    Parameters
    ----------
    points, cells
        m, shape (n_nodes, dim), and node numbers, shape (n_cells, dim + 1).

    Returns
    -------
    int
        How many cells are numbered inside out; that alone is harmless.

    Raises
    ------
    CaseError
    """
    dim = points.shape[1]
    measure = signed_measure(points, cells)
    first, second = np.triu_indices(dim + 1, 1)
    longest = np.linalg.norm(points[cells[:, first]] - points[cells[:, second]], axis=2).max(axis=1)
    flat = np.flatnonzero(np.abs(measure) <= FLAT * longest**dim)
    if len(flat):
        kind = "volume" if dim == 3 else "area"
        raise mesh_fault(f"{len(flat)} cells have no {kind}, the first at {_at(points[cells[flat[0]]].mean(axis=0))}")
    ordered = np.sort(cells, axis=1)
    order = np.lexsort(ordered.T)
    doubled = np.flatnonzero(np.all(ordered[order[1:]] == ordered[order[:-1]], axis=1))
    if len(doubled):
        place = points[cells[order[doubled[0]]]].mean(axis=0)
        raise mesh_fault(f"{len(doubled)} cells are there twice, the first at {_at(place)}")
    _check_facets(points, cells, measure < 0)
    return int(np.count_nonzero(measure < 0))


def _check_facets(points: np.ndarray, cells: np.ndarray, negative: np.ndarray) -> None:
    """Refuse facets of three or more cells, and cells that lie on the same side of their common facet.

    Two positively oriented cells see a common facet turned opposite ways when they lie on its two
    sides; when they see it alike, one is folded into the other. That is independent of how the
    file numbers its cells.
    """
    dim = points.shape[1]
    cell_facets, facets = number_facets(cells)
    count = np.bincount(cell_facets.ravel(), minlength=len(facets))
    many = np.flatnonzero(count > 2)
    if len(many):
        what = f"{len(many)} {'faces' if dim == 3 else 'sides'} have more than two cells, the first at "
        raise mesh_fault(what + f"{_at(points[facets[many[0]]].mean(axis=0))}: cells overlap")
    nodes = cells[:, local_facets(dim)]
    even = _is_even(nodes) ^ negative[:, None]
    turns = np.bincount(cell_facets.ravel(), weights=np.where(even, 1.0, -1.0).ravel(), minlength=len(facets))
    folded = np.flatnonzero((count == 2) & (turns != 0))
    if len(folded):
        what = f"{len(folded)} pairs of neighbouring cells lie on the same side of the face between them, the first at "
        raise mesh_fault(what + f"{_at(points[facets[folded[0]]].mean(axis=0))}: the mesh is folded there")


def _is_even(nodes: np.ndarray) -> np.ndarray:
    """Return whether each row of nodes (2 or 3, last axis) is an even permutation of its sorted order."""
    if nodes.shape[-1] == 2:
        return nodes[..., 0] < nodes[..., 1]
    a, b, c = nodes[..., 0], nodes[..., 1], nodes[..., 2]
    return ((a > b).astype(int) + (a > c) + (b > c)) % 2 == 0


def check_surface(mesh: Mesh) -> None:
    """Refuse a surface folded flat onto itself: two cells meet there without sharing a face.

    That is what a hexahedron next to tetrahedra with no pyramid between leaves, or a fine part set
    against a coarse one.

    Raises
    ------
    CaseError
    """
    pairs = facet_neighbours(mesh.facets, mesh.n_nodes, reach=3)
    normals = facet_normals(mesh)
    pairs = pairs[np.einsum("ij,ij->i", normals[pairs[:, 0]], normals[pairs[:, 1]]) < -1 + 1e-10]
    centre = mesh.points[mesh.facets].mean(axis=1)
    first, second = mesh.facets[pairs[:, 0]], mesh.facets[pairs[:, 1]]
    shared = np.any(first[:, :, None] == second[:, None, :], axis=2)
    middle = np.einsum("ij,ijk->ik", shared / shared.sum(axis=1, keepdims=True).clip(1), mesh.points[first])
    same_side = np.einsum("ij,ij->i", centre[pairs[:, 0]] - middle, centre[pairs[:, 1]] - middle) > 0
    if mesh.dim == 3:
        same_side = _same_side(mesh, first, second, shared)
    if np.any(same_side):
        where = centre[pairs[np.argmax(same_side), 0]]
        count = np.count_nonzero(same_side)
        raise mesh_fault(
            f"{count} faces lie on top of others without being joined, the first at {_at(where)}: cells meet there "
            "that share no face (solid cells of different kinds, or a fine part against a coarse one)"
        )


def _same_side(mesh: Mesh, first: np.ndarray, second: np.ndarray, shared: np.ndarray) -> np.ndarray:
    """Return whether pairs of triangles with a common edge lie on the same side of it."""
    in_second = np.any(second[:, :, None] == first[:, None, :], axis=2)
    rows = np.arange(len(first))
    apex = mesh.points[first[rows, np.argmin(shared, axis=1)]]
    other = mesh.points[second[rows, np.argmin(in_second, axis=1)]]
    start = mesh.points[first[rows, np.argmax(shared, axis=1)]]
    end = mesh.points[first[rows, 2 - np.argmax(shared[:, ::-1], axis=1)]]
    along = (end - start) / np.linalg.norm(end - start, axis=1, keepdims=True)
    off = [p - start - np.einsum("ij,ij->i", p - start, along)[:, None] * along for p in (apex, other)]
    return np.einsum("ij,ij->i", off[0], off[1]) > 0
