"""Measures of cells and facets with the weight of the section they stand for.

The weight is 1 in three dimensions and in a cross-section (answers per metre of depth), and
``2 pi r`` in an axisymmetric one. The finite volumes need integrals of r itself; the lower bound
carries fluxes ``r q`` that are constant on a cell or facet, so it needs the *harmonic* mean of r
(zero where the axis is reached along an edge: that cell is then left out, which keeps the bound).
"""

from __future__ import annotations

import numpy as np

from coldseam.mesh.build import signed_measure
from coldseam.mesh.types import Mesh

TURN = 2.0 * np.pi


def cell_radius(mesh: Mesh) -> np.ndarray | None:
    """Return ``2 pi r`` at the centroid of every cell, m; None where the weight is 1."""
    return TURN * mesh.points[mesh.cells, 0].mean(axis=1) if mesh.axisymmetric else None


def node_shares_of_cells(mesh: Mesh, density: np.ndarray) -> np.ndarray:
    """Return the integral of ``density`` (n_cells,) times each node's hat function, shape (n_nodes,)."""
    measure = signed_measure(mesh.points, mesh.cells)
    if not mesh.axisymmetric:
        share = np.repeat((density * measure / (mesh.dim + 1))[:, None], mesh.dim + 1, axis=1)
    else:  # the integral of r times a hat function over a triangle is |c| (r_i + sum r) / 12
        r = mesh.points[mesh.cells, 0]
        share = TURN * (density * measure / 12.0)[:, None] * (r + r.sum(axis=1, keepdims=True))
    return np.bincount(mesh.cells.ravel(), share.ravel(), mesh.n_nodes)


def facet_length(points: np.ndarray, facets: np.ndarray) -> np.ndarray:
    """Return plain facet lengths (m) or areas (m²), shape (n,)."""
    edges = points[facets[:, 1:]] - points[facets[:, :1]]
    if facets.shape[1] == 2:
        return np.linalg.norm(edges[:, 0], axis=1)
    return 0.5 * np.linalg.norm(np.cross(edges[:, 0], edges[:, 1]), axis=1)


def facet_shares(mesh: Mesh, facets: np.ndarray) -> np.ndarray:
    """Return each facet node's share of the facet's area, m² (2D: m²/m), shape (n, dim)."""
    length = facet_length(mesh.points, facets)[:, None]
    if not mesh.axisymmetric:
        return np.repeat(length / mesh.dim, mesh.dim, axis=1)
    r = mesh.points[facets, 0]
    return TURN * length * (2.0 * r + r[:, ::-1]) / 6.0


def harmonic_radius_of_cells(mesh: Mesh) -> np.ndarray | None:
    """Return ``2 pi`` over the mean of 1/r of every triangle, shape (n_cells,); None where the weight is 1.

    With the radii of the corners a, b, c the mean of 1/r over a triangle is
    ``2 sum_i r_i ln r_i / ((r_i - r_j) (r_i - r_k))`` (a divided difference of ``r ln r``).
    """
    if not mesh.axisymmetric:
        return None
    r = np.sort(mesh.points[mesh.cells, 0], axis=1)
    return TURN / _mean_inverse(r)


def _mean_inverse(r: np.ndarray) -> np.ndarray:
    """Return the mean of 1/r over triangles with sorted corner radii (n, 3); inf with an edge on the axis."""
    a, b, c = r.T
    scale = np.where(c > 0, c, 1.0)
    a, b = a / scale, b / scale
    on_axis = b <= 1e-12
    a, b = np.where(on_axis, 0.3, a), np.where(on_axis, 0.6, b)
    spread = 1.0 - a
    centre = (a + b + 1.0) / 3.0
    # Second divided difference of r ln r; where the corners are close it is replaced by its Taylor series
    # about the centroid, 1/(2 r) (1 + sum d_i² / (12 r²) + ...), which then is exact to rounding.
    first_ab = _log_difference(a, b)
    first_bc = _log_difference(b, np.ones_like(b))
    with np.errstate(divide="ignore", invalid="ignore"):
        direct = 2.0 * (first_bc - first_ab) / spread
    d = np.stack([a, b, np.ones_like(a)]) - centre
    m2, m3, m4 = ((d**p).sum(axis=0) / centre**p for p in (2, 3, 4))
    series = (1.0 + m2 / 12.0 - m3 / 30.0 + (m4 / 60.0 + m2**2 / 120.0)) / centre
    mean = np.where(spread < 0.02, series, direct) / scale
    return np.where(on_axis, np.inf, mean)


def _log_difference(x: np.ndarray, y: np.ndarray) -> np.ndarray:
    """Return (y ln y - x ln x)/(y - x) for 0 <= x <= y, y > 0."""
    gap = y - x
    t = gap / y
    small, zero = t < 1e-7, x <= 0
    safe = np.where(small | zero, 0.5, t)
    # y ln y - x ln x = gap ln y - x ln(1 - t)
    ratio = np.where(small, 1.0 + t / 2.0, -np.log1p(-safe) / safe)
    ratio = np.where(zero, 0.0, ratio)
    return np.log(y) + x / y * ratio


def harmonic_lengths(mesh: Mesh, facets: np.ndarray) -> np.ndarray:
    """Return facet areas weighted by the harmonic mean of ``2 pi r``, m² (2D: m²/m), shape (n,)."""
    length = facet_length(mesh.points, facets)
    if not mesh.axisymmetric:
        return length
    r = np.sort(mesh.points[facets, 0], axis=1)
    low, high = r.T
    t = np.where(high > 0, (high - low) / np.where(high > 0, high, 1.0), 1.0)
    small = t < 1e-6
    safe = np.where(small | (t >= 1.0), 0.5, t)
    mean_inverse = np.where(small, 1.0 + t / 2.0, -np.log1p(-safe) / safe)
    weight = np.where(t >= 1.0, 0.0, high / mean_inverse)
    return TURN * length * weight
