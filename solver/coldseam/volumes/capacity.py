"""Heat capacities of the control volumes, lumped: each node stores what its median-dual cell holds.

On a simplex the lumped share is ``rho c |c| / (dim + 1)`` for every node (with 2 pi r in an axisymmetric
section, integrated exactly). A diagonal capacity and conductances between nodes make an implicit step an
M-matrix wherever the conductances are not negative, so no temperature leaves the range of its causes.
Sheets store heat on the nodes of their facets.
"""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

import numpy as np

from coldseam.mesh.boundaries import select
from coldseam.mesh.contacts import interface_facets
from coldseam.mesh.types import Mesh
from coldseam.volumes.conditions import body_mask
from coldseam.volumes.section import facet_shares, node_shares_of_cells

if TYPE_CHECKING:
    from coldseam.case.model import Case, Sheet


def volumetric_capacity(case: Case, mesh: Mesh, at: float | np.ndarray = 20.0) -> np.ndarray:
    """Return density times specific heat of every cell, J/(m³ K), shape (n_cells,).

    ``at`` is the temperature (°C) that specific heats over temperature are taken at, one or one for each body,
    (n_bodies,).
    """
    values = [
        case.materials[body.material].density * case.materials[body.material].heat_at(t)
        for body, t in zip(mesh.bodies, np.broadcast_to(at, len(mesh.bodies)).tolist(), strict=True)
    ]
    return np.array(values)[mesh.cell_body]


def node_capacities(case: Case, mesh: Mesh, at: float = 20.0) -> np.ndarray:
    """Return the heat capacity of every node's control volume, J/K (2D: J/(m K)), shape (n_nodes,).

    Parameters
    ----------
    case
        Every body's and sheet's material has density (kg/m³) and specific heat (J/(kg K)).
    mesh
        The mesh, contacts opened.
    at
        The temperature (°C) that specific heats over temperature are taken at.
    """
    capacity = node_shares_of_cells(mesh, volumetric_capacity(case, mesh, at))
    for sheet, share in _sheets(case, mesh):
        material = case.materials[sheet.material]
        capacity += material.density * material.heat_at(at) * share
    return capacity


def node_masses(case: Case, mesh: Mesh, material: str) -> np.ndarray:
    """Return how much of a material, named as in the case, every control volume holds, kg (2D: kg/m), (n_nodes,)."""
    density = case.materials[material].density
    made = np.array([body.material == material for body in mesh.bodies])[mesh.cell_body]
    mass = node_shares_of_cells(mesh, density * made)
    for sheet, share in _sheets(case, mesh):
        mass += density * share if sheet.material == material else 0.0
    return mass


def _sheets(case: Case, mesh: Mesh) -> Iterator[tuple[Sheet, np.ndarray]]:
    """Yield every sheet with its volume in the control volumes, m³ (2D: m³/m), (n_nodes,)."""
    for sheet in case.sheet:
        if sheet.between is not None:
            first, second = (body_mask(case, mesh, name) for name in sheet.between)
            facets = interface_facets(mesh, first, second)[0]
        else:
            facets = mesh.facets[select(sheet.on, mesh)]
        yield sheet, np.bincount(facets.ravel(), sheet.thickness * facet_shares(mesh, facets).ravel(), mesh.n_nodes)
