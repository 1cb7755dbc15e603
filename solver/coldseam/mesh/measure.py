"""Lengths, areas, volumes and directions of a mesh's facets and cells.

In a cross-section everything is per metre of depth (a facet's "area" is its length, m²/m). In an
axisymmetric section the whole turn counts: a ring of radius r swept from a straight facet has the
area ``2 pi integral(r ds) = 2 pi mean(r) length``, exact because r is linear along the facet, and a
cell the volume ``2 pi r_centroid area`` (Pappus, Guldin).
"""

from __future__ import annotations

import numpy as np

from coldseam.mesh.build import signed_measure
from coldseam.mesh.types import Mesh


def facet_vectors(mesh: Mesh) -> np.ndarray:
    """Return the outward area vectors of the exterior facets, m² (m in 2D), shape (n_facets, dim).

    The factor of the whole turn is not in them.
    """
    corner = mesh.points[mesh.facets]
    if mesh.dim == 2:
        along = corner[:, 1] - corner[:, 0]
        return np.column_stack([along[:, 1], -along[:, 0]])
    return 0.5 * np.cross(corner[:, 1] - corner[:, 0], corner[:, 2] - corner[:, 0])


def facet_normals(mesh: Mesh) -> np.ndarray:
    """Return the outward unit normals of the exterior facets, shape (n_facets, dim)."""
    vectors = facet_vectors(mesh)
    return vectors / np.linalg.norm(vectors, axis=1, keepdims=True)


def facet_measure(mesh: Mesh) -> np.ndarray:
    """Return the areas of the exterior facets, shape (n_facets,).

    m² in 3D and in an axisymmetric section (whole turn), m²/m in a cross-section.
    """
    length = np.linalg.norm(facet_vectors(mesh), axis=1)
    return length * 2.0 * np.pi * mesh.points[mesh.facets, 0].mean(axis=1) if mesh.axisymmetric else length


def facet_centres(mesh: Mesh) -> np.ndarray:
    """Return the centroids of the exterior facets, m, shape (n_facets, dim)."""
    return mesh.points[mesh.facets].mean(axis=1)


def cell_measure(mesh: Mesh) -> np.ndarray:
    """Return the volumes of the cells, shape (n_cells,).

    m³ in 3D and in an axisymmetric section (whole turn), m³/m in a cross-section.
    """
    volume = signed_measure(mesh.points, mesh.cells)
    return volume * 2.0 * np.pi * mesh.points[mesh.cells, 0].mean(axis=1) if mesh.axisymmetric else volume


def cell_quality(points: np.ndarray, cells: np.ndarray) -> np.ndarray:
    """Return the shape quality of simplices, 1 for the regular one, 0 for a flat one, shape (n_cells,).

    Triangles: ``4 sqrt(3) area / sum(edge²)``; tetrahedra: ``12 (3 volume)^(2/3) / sum(edge²)``, the
    mean-ratio measure of Liu and Joe, "Relationship between tetrahedron shape measures",
    BIT 34 (1994) 268-287 (formula from memory).
    """
    dim = points.shape[1]
    first, second = np.triu_indices(dim + 1, 1)
    square = np.sum((points[cells[:, first]] - points[cells[:, second]]) ** 2, axis=(1, 2))
    size = np.maximum(signed_measure(points, cells), 0.0)
    if dim == 2:
        return 4.0 * np.sqrt(3.0) * size / square
    return 12.0 * np.cbrt(3.0 * size) ** 2 / square
