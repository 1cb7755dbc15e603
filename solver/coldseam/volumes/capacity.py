"""Heat capacities of the control volumes, lumped: each node stores what its median-dual cell holds.

On a simplex the lumped share is ``rho c |c| / (dim + 1)`` for every node (with 2 pi r in an axisymmetric
section, integrated exactly). A diagonal capacity and conductances between nodes make an implicit step an
M-matrix wherever the conductances are not negative, so no temperature leaves the range of its causes.
Sheets store heat on the nodes of their facets.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from coldseam.mesh.boundaries import select
from coldseam.mesh.contacts import interface_facets
from coldseam.mesh.types import Mesh
from coldseam.volumes.conditions import body_mask
from coldseam.volumes.section import facet_shares, node_shares_of_cells

if TYPE_CHECKING:
    from coldseam.case.model import Case


def volumetric_capacity(case: Case, mesh: Mesh) -> np.ndarray:
    """Return density times specific heat of every cell, J/(m³ K), shape (n_cells,)."""
    values = [
        case.materials[body.material].density * case.materials[body.material].specific_heat for body in mesh.bodies
    ]
    return np.array(values)[mesh.cell_body]


def node_capacities(case: Case, mesh: Mesh) -> np.ndarray:
    """Return the heat capacity of every node's control volume, J/K (2D: J/(m K)), shape (n_nodes,).

    Parameters
    ----------
    case
        Every body's and sheet's material has density (kg/m³) and specific heat (J/(kg K)).
    mesh
        The mesh, contacts opened.
    """
    capacity = node_shares_of_cells(mesh, volumetric_capacity(case, mesh))
    for sheet in case.sheet:
        material = case.materials[sheet.material]
        if sheet.between is not None:
            first, second = (body_mask(case, mesh, name) for name in sheet.between)
            facets = interface_facets(mesh, first, second)[0]
        else:
            facets = mesh.facets[select(sheet.on, mesh)]
        per_area = material.density * material.specific_heat * sheet.thickness
        capacity += np.bincount(facets.ravel(), per_area * facet_shares(mesh, facets).ravel(), mesh.n_nodes)
    return capacity
