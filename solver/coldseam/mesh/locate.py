"""Find points in a mesh: the cell that holds each and its barycentric coordinates."""

from __future__ import annotations

import numpy as np
from scipy.spatial import cKDTree

from coldseam.mesh.types import Mesh

CLOSE = 4  # cells tried around each point of a whole field
NEAREST = 64  # cells tried around each point before all of them are


def locate(mesh: Mesh, points: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return cell numbers and barycentric coordinates of points.

    Parameters
    ----------
    mesh
        The mesh.
    points
        m, shape (n, dim).

    Returns
    -------
    cells
        The cell that holds each point, -1 where it lies outside by more than 1e-6 of the model, (n,).
    weights
        Barycentric coordinates in that cell, shape (n, dim + 1).
    """
    centres = mesh.points[mesh.cells].mean(axis=1)
    _, near = cKDTree(centres).query(points, k=min(NEAREST, mesh.n_cells))
    near = near.reshape(len(points), -1)
    cells, weights = np.full(len(points), -1), np.zeros((len(points), mesh.dim + 1))
    for number, point in enumerate(points):  # a handful of probes
        for candidates in (near[number], np.arange(mesh.n_cells)):
            inside = _barycentric(mesh, candidates, point)
            best = int(np.argmax(inside.min(axis=1)))
            found = np.clip(inside[best], 0.0, None)
            found /= found.sum()
            miss = np.linalg.norm(found @ mesh.points[mesh.cells[candidates[best]]] - point)
            if miss <= 1e-6 * mesh.size:
                cells[number], weights[number] = candidates[best], found
                break
    return cells, weights


def interpolate(mesh: Mesh, values: np.ndarray, points: np.ndarray) -> np.ndarray:
    """Return a field of any unit on other points, near enough to start an iteration from.

    Each point takes the one of the nearest few cells that it lies best in, not surely the cell that holds it.

    Parameters
    ----------
    mesh
        The mesh of the field.
    values
        At its nodes, shape (n_nodes, m).
    points
        m, shape (n, dim).

    Returns
    -------
    np.ndarray
        Shape (n, m).
    """
    corners = mesh.points[mesh.cells]
    inverse = np.linalg.inv(np.swapaxes(corners[:, 1:] - corners[:, :1], 1, 2))
    _, near = cKDTree(corners.mean(axis=1)).query(points, k=min(CLOSE, mesh.n_cells))
    near = near.reshape(len(points), -1)
    rest = np.einsum("nkij,nkj->nki", inverse[near], points[:, None] - corners[near, 0])
    weights = np.concatenate([1.0 - rest.sum(axis=2, keepdims=True), rest], axis=2)
    best = weights.min(axis=2).argmax(axis=1)
    rows = np.arange(len(points))
    weights = np.clip(weights[rows, best], 0.0, None)
    weights /= weights.sum(axis=1, keepdims=True)
    return np.einsum("nk,nkm->nm", weights, values[mesh.cells[near[rows, best]]])


def _barycentric(mesh: Mesh, cells: np.ndarray, point: np.ndarray) -> np.ndarray:
    """Return the barycentric coordinates of one point in many cells, (n_cells, dim + 1)."""
    corners = mesh.points[mesh.cells[cells]]
    edges = np.swapaxes(corners[:, 1:] - corners[:, :1], 1, 2)
    rest = np.linalg.solve(edges, (point - corners[:, 0])[:, :, None])[:, :, 0]
    return np.column_stack([1.0 - rest.sum(axis=1), rest])
