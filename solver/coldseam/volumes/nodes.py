"""The vertex-centred network: one site per node, the control volume its median-dual cell.

Films act on each node's share of the face (lumped), so every control volume closes its balance
and no film can push a temperature out of range. Lumping raises the energy (for non-negative
weights sum_i m_i T_i² >= T.M T), and so does restricting T to linear elements: Lambda of this
network is an upper bound of the exact one.
"""

from __future__ import annotations

import numpy as np
from scipy import sparse

from coldseam.mesh.types import Mesh
from coldseam.volumes.conditions import Conditions
from coldseam.volumes.network import Network
from coldseam.volumes.operator import EdgeOperator, cell_weights, edge_operator
from coldseam.volumes.section import cell_radius, facet_shares, node_shares_of_cells
from coldseam.volumes.sheets import laplacian, sheet_laplacian, sheet_weights


def node_operator(mesh: Mesh, given: Conditions) -> tuple[EdgeOperator, np.ndarray]:
    """Return the operator P of a mesh and its cells' plain edge weights (3 or 6, n_cells)."""
    weights = cell_weights(mesh, given.tensors, tensor_of=given.tensor_of(mesh))
    radius = cell_radius(mesh)
    return edge_operator(mesh, weights if radius is None else weights * radius), weights


def node_network(mesh: Mesh, given: Conditions, operator: EdgeOperator) -> Network:
    """Return the network of the finite volumes.

    Parameters
    ----------
    mesh
        The mesh, contacts opened.
    given
        The conditions on it.
    operator
        From :func:`node_operator`.
    """
    n = mesh.n_nodes
    if given.turned:  # the operator is of other tensors
        operator = node_operator(mesh, given)[0]
    matrix = operator.matrix(given.conductivity)
    for extra in (sheet_matrix(mesh, given), link_matrix(mesh, given)):
        if extra is not None:
            matrix = (matrix + extra).tocsr()
    shares = facet_shares(mesh, mesh.facets)
    films = given.film > 0
    sites = mesh.facets[films].ravel()
    strength = (shares[films] * given.film[films, None]).ravel()
    exchange = sparse.coo_array(
        (strength, (sites, np.repeat(given.terminal[films], mesh.dim))), shape=(n, len(given.terminals))
    ).tocsr()
    matrix = (matrix + sparse.diags_array(np.asarray(exchange.sum(axis=1)).ravel())).tocsr()

    fixed = np.full(n, -1, dtype=np.int64)
    for number, terminal in enumerate(given.terminals):
        if terminal.fixed:
            fixed[mesh.facets[given.terminal == number]] = number
    load = node_shares_of_cells(mesh, given.source) if np.any(given.source) else np.zeros(n)
    if np.any(given.flux):
        load += np.bincount(mesh.facets.ravel(), (shares * given.flux[:, None]).ravel(), n)
    return Network(matrix=matrix, exchange=exchange, fixed=fixed, load=load, constant=0.0, has_load=given.has_sources)


def sheet_matrix(mesh: Mesh, given: Conditions) -> sparse.csr_array | None:
    """Return the in-plane conduction of the sheets between the nodes of their facets, None without sheets."""
    if len(given.sheet_facets) == 0:
        return None
    weights = sheet_weights(mesh, given.sheet_facets, given.sheet_conductance)
    return sheet_laplacian(given.sheet_facets, weights, mesh.n_nodes)


def link_matrix(mesh: Mesh, given: Conditions) -> sparse.csr_array | None:
    """Return the contacts' conductances between the nodes of their two sides, None without contacts."""
    if mesh.links is None or len(mesh.links) == 0:
        return None
    shares = facet_shares(mesh, mesh.links[:, 0]) * given.link_conductance[:, None]
    return laplacian(mesh.links[:, 0].ravel(), mesh.links[:, 1].ravel(), shares.ravel(), mesh.n_nodes)
