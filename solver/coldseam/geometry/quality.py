"""What a mesh is worth: angles, radius ratios, and whether it fills the geometry."""

from __future__ import annotations

import math

import numpy as np

from coldseam.errors import GeometryError
from coldseam.mesh.build import local_facets, signed_measure
from coldseam.mesh.types import Mesh

CHUNK = 200_000
"""Cells looked at in one go, to bound memory."""


def mesh_quality(mesh: Mesh) -> dict[str, float]:
    """Return the worst and typical shape of the cells.

    Returns
    -------
    dict
        ``min_angle`` (degrees; between edges in 2D, between faces in 3D), ``worst_radius_ratio``
        and ``mean_radius_ratio`` (dim times inscribed over circumscribed radius: 1 regular, 0 flat),
        ``smallest_cell`` (m² or m³).

    Raises
    ------
    GeometryError
        A cell has no volume.
    """
    measure = signed_measure(mesh.points, mesh.cells)
    if np.any(measure <= 0.0):
        k = int(np.argmin(measure))
        place = ", ".join(f"{x * 1e3:.4g}" for x in mesh.points[mesh.cells[k]].mean(axis=0))
        raise GeometryError(
            f"The mesh holds {np.count_nonzero(measure <= 0.0)} cells without volume, one in "
            f"'{mesh.bodies[mesh.cell_body[k]].name}' at ({place}) mm."
        )
    angle, ratio = [], []
    for first in range(0, mesh.n_cells, CHUNK):
        part = slice(first, first + CHUNK)
        corners = mesh.points[mesh.cells[part]]
        a, r = _triangle_shape(corners) if mesh.dim == 2 else _tetrahedron_shape(corners, measure[part])
        angle.append(a.min())
        ratio.append(r)
    ratio = np.concatenate(ratio)
    return {
        "min_angle": float(np.degrees(min(angle))),
        "worst_radius_ratio": float(ratio.min()),
        "mean_radius_ratio": float(ratio.mean()),
        "smallest_cell": float(measure.min()),
    }


def shape_of(points: np.ndarray, cells: np.ndarray) -> np.ndarray:
    """Return the radius ratio (a number from 0, no volume, to 1, regular) of tetrahedra, orientation aside, shape (n_cells,)."""
    ratio = np.zeros(len(cells))
    for first in range(0, len(cells), CHUNK):
        part = cells[first : first + CHUNK]
        volume = np.abs(signed_measure(points, part))
        full = volume > 0.0
        ratio[first : first + CHUNK][full] = _tetrahedron_shape(points[part[full]], volume[full])[1]
    return ratio


def _triangle_shape(corners: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return the smallest angle (rad) and the radius ratio of triangles, shapes (n,)."""
    edges = corners[:, [2, 0, 1]] - corners[:, [1, 2, 0]]
    a, b, c = np.linalg.norm(edges, axis=2).T
    area2 = np.abs(edges[:, 0, 0] * edges[:, 1, 1] - edges[:, 0, 1] * edges[:, 1, 0])
    # the angle at a corner between two edges: sin = 2 A / (product), the smallest faces the shortest edge
    long = np.sort(np.stack([a, b, c]), axis=0)
    angle = np.arcsin(np.clip(area2 / (long[1] * long[2]), 0.0, 1.0))
    inner, outer = area2 / (a + b + c), a * b * c / (2.0 * area2)
    return angle, 2.0 * inner / outer


def _tetrahedron_shape(corners: np.ndarray, volume: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return the smallest dihedral angle (rad) and the radius ratio of tetrahedra, shapes (n,)."""
    faces = corners[:, local_facets(3)]
    normal = np.cross(faces[:, :, 1] - faces[:, :, 0], faces[:, :, 2] - faces[:, :, 0])
    size = np.linalg.norm(normal, axis=2)
    unit = normal / np.maximum(size, 1e-300)[:, :, None]
    i, j = np.triu_indices(4, 1)
    angle = np.pi - np.arccos(np.clip(np.einsum("cij,cij->ci", unit[:, i], unit[:, j]), -1.0, 1.0))
    inner = 3.0 * volume / (0.5 * size.sum(axis=1))
    a, b, c = (corners[:, k] - corners[:, 0] for k in (1, 2, 3))
    square = [np.sum(x * x, axis=1)[:, None] for x in (a, b, c)]
    centre = square[0] * np.cross(b, c) + square[1] * np.cross(c, a) + square[2] * np.cross(a, b)
    outer = np.linalg.norm(centre, axis=1) / (12.0 * volume)
    return angle.min(axis=1), 3.0 * inner / outer


def check_measure(mesh: Mesh, exact: dict[str, float], segments: int) -> dict[str, float]:
    """Return every body's meshed volume (m³) or area (m²) and refuse a mesh that misses the geometry.

    The tolerance is twice the area that a polygon of ``segments`` corners lacks in its circle (a
    sphere lacks up to that), or 3 % where that is more.

    Raises
    ------
    GeometryError
        A body's meshed volume is off.
    """
    measure = np.bincount(mesh.cell_body, signed_measure(mesh.points, mesh.cells), minlength=len(mesh.bodies))
    full = 2.0 * math.pi / segments
    allowed = max(0.03, 2.0 * (1.0 - math.sin(full) / full))
    found: dict[str, float] = {}
    for body, value in zip(mesh.bodies, measure, strict=True):
        found[body.name] = float(value)
        if abs(value - exact[body.name]) > allowed * exact[body.name]:
            raise GeometryError(
                f"The mesh of '{body.name}' has {value:.6g} where the geometry has {exact[body.name]:.6g} "
                f"(m², or m³): it does not fill it."
            )
    return found
