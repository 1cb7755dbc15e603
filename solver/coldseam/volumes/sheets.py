"""Sheets: thin layers that conduct along a face without being meshed through their thickness.

A sheet has one temperature across its thickness, that of the face it lies on, and a conductance in
its plane, conductivity times thickness. On a facet the linear field has constant gradient, so a
sheet is the cell operator one dimension lower: a conductance along a line in a section, half the
cotangents of the opposite angles on a triangle.
"""

from __future__ import annotations

import numpy as np
from scipy import sparse

from coldseam.mesh.types import Mesh
from coldseam.volumes.section import TURN, facet_length, harmonic_lengths

_PAIRS = {2: ((0, 1),), 3: ((0, 1), (1, 2), (2, 0))}


def laplacian(first: np.ndarray, second: np.ndarray, conductance: np.ndarray, n: int) -> sparse.csr_array:
    """Return the (n, n) matrix of conductances (W/K) between pairs of sites, all of shape (m,)."""
    rows = np.concatenate([first, second, first, second])
    columns = np.concatenate([second, first, first, second])
    data = np.concatenate([-conductance, -conductance, conductance, conductance])
    return sparse.coo_array((data, (rows, columns)), shape=(n, n)).tocsr()


def sheet_pairs(dim: int) -> np.ndarray:
    """Return the local node pairs of a sheet facet, shape (1 or 3, 2)."""
    return np.array(_PAIRS[dim])


def sheet_weights(mesh: Mesh, nodes: np.ndarray, kt: np.ndarray, *, harmonic: bool = False) -> np.ndarray:
    """Return the conductance of every pair of a sheet facet's nodes.

    Parameters
    ----------
    mesh
        The mesh.
    nodes
        Nodes of the facets, (n, dim).
    kt
        Conductivity times thickness, W/K, (n,).
    harmonic
        Weight an axisymmetric section by the harmonic mean radius, for the lower bound.

    Returns
    -------
    conductance
        W/K (2D: W/(m K)), (1 or 3, n).
    """
    p = mesh.points[nodes]
    if mesh.dim == 2:
        length = np.linalg.norm(p[:, 1] - p[:, 0], axis=1)
        if harmonic:
            return (kt * harmonic_lengths(mesh, nodes) / length**2)[None]
        weight = TURN * p[:, :, 0].mean(axis=1) if mesh.axisymmetric else 1.0
        return (kt * weight / length)[None]
    rows = []
    for i, j in _PAIRS[3]:
        k = 3 - i - j
        u, v = p[:, i] - p[:, k], p[:, j] - p[:, k]
        rows.append(0.5 * kt * np.einsum("ij,ij->i", u, v) / np.linalg.norm(np.cross(u, v), axis=1))
    return np.stack(rows)


def sheet_laplacian(sites: np.ndarray, weights: np.ndarray, n: int) -> sparse.csr_array:
    """Return the (n, n) matrix of sheet weights (1 or 3, m) between the sites (m, dim) of each facet."""
    pairs = _PAIRS[sites.shape[1]]
    first = np.concatenate([sites[:, i] for i, _ in pairs])
    second = np.concatenate([sites[:, j] for _, j in pairs])
    return laplacian(first, second, weights.ravel(), n)


def sheet_moment(mesh: Mesh, nodes: np.ndarray, kt: np.ndarray) -> np.ndarray:
    """Return the energy per squared watt of the in-sheet flux (p / d)(x - x_c), d = dim - 1, K/W, (n,)."""
    p = mesh.points[nodes]
    length = facet_length(mesh.points, nodes)
    if mesh.dim == 2:
        weight = TURN * p[:, :, 0].mean(axis=1) if mesh.axisymmetric else 1.0
        return length / (12.0 * kt * weight)
    arms = p - p.mean(axis=1, keepdims=True)
    return (arms**2).sum(axis=(1, 2)) / (48.0 * length * kt)
