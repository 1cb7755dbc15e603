"""The heat flux of a solved field, for pictures and files; heat flows never come from it."""

from __future__ import annotations

import numpy as np

from coldseam.solution.steady import Steady


def cell_flux(steady: Steady) -> np.ndarray:
    """Return ``-K grad T`` of every cell, W/m², shape (n_cells, dim)."""
    mesh = steady.mesh
    corners = mesh.points[mesh.cells]
    edges = corners[:, 1:] - corners[:, :1]
    t = steady.temperature[mesh.cells]
    gradient = np.linalg.solve(edges, (t[:, 1:] - t[:, :1])[:, :, None])[:, :, 0]
    flux = -steady.given.conductivity[:, None] * gradient
    if steady.given.tensors is None:
        return flux
    return np.einsum("cij,cj->ci", steady.given.tensors[steady.given.tensor_of(mesh)], flux)
