"""A mesh with fewer cells for the viewer of a report."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from coldseam.report.view import View

MOST_CELLS = 260_000


@dataclass(frozen=True, kw_only=True, eq=False)
class Thinned:
    """A mesh with the field that it carries, perhaps coarser than that of the solution.

    Parameters
    ----------
    node
        The node of the whole mesh that each node is, shape (n,).
    points
        m, shape (n, dim).
    cells, body, flux
        Corners, body and size of the heat flux (W/m²) of the cells, shapes (m, dim + 1), (m,), (m,).
    facets, facet_cell, facet_boundary
        Exterior facets, the cells behind them and their boundaries, shapes (f, dim), (f,), (f,).
    whole
        Cells of the whole mesh.
    error
        Largest difference of temperature to the whole mesh, K; 0 where nothing was left out.
    """

    node: np.ndarray
    points: np.ndarray
    cells: np.ndarray
    body: np.ndarray
    flux: np.ndarray
    facets: np.ndarray
    facet_cell: np.ndarray
    facet_boundary: np.ndarray
    whole: int
    error: float = 0.0


def thinned(view: View, most: int = MOST_CELLS) -> Thinned:
    """Return the mesh of a result with at most about so many cells."""
    mesh = view.mesh
    return Thinned(
        node=np.arange(mesh.n_nodes),
        points=mesh.points,
        cells=mesh.cells,
        body=mesh.cell_body,
        flux=np.linalg.norm(view.cell_flux, axis=1),
        facets=mesh.facets,
        facet_cell=mesh.facet_cell,
        facet_boundary=view.facet_boundary,
        whole=mesh.n_cells,
    )
