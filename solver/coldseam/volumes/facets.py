"""The facet network: Crouzeix-Raviart temperatures, whose fluxes prove a lower bound.

One site per facet; inside a cell the temperature is linear with the sites' values at the facet
centres, and the gradient of the basis function of facet i is ``-dim grad(lambda_i)``. So the
conductance between the facets opposite nodes i and j is ``dim² k w_cij`` with the node operator's
own weights. Films and contacts act on facet-centre values. At the minimum each facet balances, and

    q = -K grad u + (f / dim) (x - x_c)                       (Marini 1985, SIAM J. Numer. Anal. 22, 493)

is a Raviart-Thomas flux with continuous normal component and divergence f. By the complementary
(Thomson) principle its energy bounds the exact one from below; the second term's own energy is the
network's ``constant``.

Sheets: a sheet's facet takes the mean of a Crouzeix-Raviart field *in the sheet* (sites on its edge
centres, or its end points in a section), which receives the facet's heat as a constant source: the
same construction one dimension lower, so the bound holds with the in-plane conduction included.

Axisymmetric: the flux carried is r q, constant on a cell; its energy needs the mean of 1/r, so
weights take the harmonic mean of r (see section.py). A source makes div(r q) = r f, which this flux
meets only on average over a cell; the interval is then an estimate.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import sparse

from coldseam.mesh.build import number_facets, signed_measure
from coldseam.mesh.types import Mesh
from coldseam.volumes.conditions import Conditions
from coldseam.volumes.network import Network
from coldseam.volumes.operator import cell_pairs
from coldseam.volumes.section import TURN, facet_length, harmonic_lengths, harmonic_radius_of_cells
from coldseam.volumes.sheets import sheet_laplacian, sheet_moment, sheet_weights


@dataclass(frozen=True, kw_only=True, eq=False)
class FacetSystem:
    """The facet network and how its sites lie on the mesh.

    Parameters
    ----------
    network
        The network over the sites.
    cell_facets
        Facet opposite each local node, (n_cells, dim + 1).
    facets
        Sorted nodes of each facet, (n_facets, dim).
    spread
        Facet values from site values, (n_facets, n_sites).
    from_nodes
        Site values of a nodal temperature field, (n_sites, n_nodes).
    exterior
        Facet number of each exterior facet of the mesh, (mesh.n_facets,).
    link_facets
        Facet numbers on both sides of each link, (n_links, 2).
    film_strength
        Film conductance of each exterior facet as used here, W/K.
    link_strength
        Contact conductance of each link as used here, W/K.
    load_energy
        Energy K^-1 of the flux part (f / dim)(x - x_c) of each cell, (n_cells,).
    bulk
        Conduction and films over facet values before sheets were put in, (n_facets, n_facets).
    sheet_facets, sheet_sites, sheet_conductance, sheet_moment
        Facets under sheets, their own sites, their conductivity times thickness (W/K), and the energy
        per squared watt received by each (K/W); see :func:`sheet_heat`.
    """

    network: Network
    cell_facets: np.ndarray
    facets: np.ndarray
    spread: sparse.csr_array
    from_nodes: sparse.csr_array
    exterior: np.ndarray
    link_facets: np.ndarray
    film_strength: np.ndarray
    link_strength: np.ndarray
    load_energy: np.ndarray
    bulk: Network
    sheet_facets: np.ndarray
    sheet_sites: np.ndarray
    sheet_conductance: np.ndarray
    sheet_moment: np.ndarray


def facet_system(mesh: Mesh, given: Conditions, weights: np.ndarray) -> FacetSystem:
    """Return the facet network of a mesh.

    Parameters
    ----------
    mesh, given
        Mesh (contacts opened) and conditions.
    weights
        Plain cell weights from :func:`coldseam.volumes.operator.cell_weights`, m (2D: 1), (3 or 6, n_cells).
    """
    cell_facets, facets = number_facets(mesh.cells)
    n = len(facets)
    exterior = find_facets(facets, mesh.facets)
    links = np.empty((0, 2), dtype=np.int64)
    if mesh.links is not None and len(mesh.links):
        links = np.column_stack([find_facets(facets, mesh.links[:, side]) for side in (0, 1)])

    radius = harmonic_radius_of_cells(mesh)
    k = given.conductivity if radius is None else given.conductivity * radius
    link_strength = given.link_conductance * harmonic_lengths(mesh, mesh.links[:, 0]) if len(links) else np.empty(0)
    matrix = _conduction(mesh.dim, cell_facets, weights * k, n, links, link_strength)
    film_strength = given.film * harmonic_lengths(mesh, mesh.facets)
    films = film_strength > 0
    exchange = sparse.coo_array(
        (film_strength[films], (exterior[films], given.terminal[films])), shape=(n, len(given.terminals))
    ).tocsr()
    matrix = (matrix + sparse.diags_array(np.asarray(exchange.sum(axis=1)).ravel())).tocsr()

    fixed = np.full(n, -1, dtype=np.int64)
    for number, terminal in enumerate(given.terminals):
        if terminal.fixed:
            fixed[exterior[given.terminal == number]] = number
    load, load_energy = _loads(mesh, given, cell_facets, exterior, n)
    network = Network(
        matrix=matrix, exchange=exchange, fixed=fixed, load=load, constant=load_energy.sum(), has_load=given.has_sources
    )
    spread = sparse.eye_array(n, format="csr")
    from_nodes = sparse.csr_array(
        (np.full(n * mesh.dim, 1.0 / mesh.dim), facets.ravel(), np.arange(0, n * mesh.dim + 1, mesh.dim)),
        shape=(n, mesh.n_nodes),
    )
    bulk, sheet_facets, sheet_sites = network, np.empty(0, dtype=np.int64), np.empty((0, mesh.dim), dtype=np.int64)
    kt, energy_per_heat = np.empty(0), np.empty(0)
    if len(given.sheet_facets):
        sheet_facets, kt = _merged_sheets(given, facets)
        energy_per_heat = sheet_moment(mesh, facets[sheet_facets], kt)
        network, spread, from_nodes, sheet_sites = _with_sheets(mesh, network, facets, sheet_facets, kt, from_nodes)
    return FacetSystem(
        network=network,
        cell_facets=cell_facets,
        facets=facets,
        spread=spread,
        from_nodes=from_nodes,
        exterior=exterior,
        link_facets=links,
        film_strength=film_strength,
        link_strength=link_strength,
        load_energy=load_energy,
        bulk=bulk,
        sheet_facets=sheet_facets,
        sheet_sites=sheet_sites,
        sheet_conductance=kt,
        sheet_moment=energy_per_heat,
    )


def sheet_heat(system: FacetSystem, values: np.ndarray, terminal_values: np.ndarray) -> np.ndarray:
    """Return the heat that each sheet facet receives from cells, films and loads, W, (n_sheet_facets, m).

    Parameters
    ----------
    values
        Facet values of m fields, (n_facets, m).
    terminal_values
        Their terminal temperatures and load scale, (n_terminals [+ 1], m).
    """
    rows, bulk = system.sheet_facets, system.bulk
    heat = bulk.exchange[rows] @ terminal_values[: bulk.n_terminals] - bulk.matrix[rows] @ values
    if bulk.has_load:
        heat += bulk.load[rows, None] * terminal_values[-1]
    return heat


def find_facets(facets: np.ndarray, wanted: np.ndarray) -> np.ndarray:
    """Return the number, shape (n,), of each wanted facet (n, dim), nodes in any order, among sorted facets (n_facets, dim)."""
    n = int(facets.max()) + 1
    wanted = np.sort(wanted, axis=1)
    if float(n) ** facets.shape[1] < 2.0**62:
        place = n ** np.arange(facets.shape[1] - 1, -1, -1, dtype=np.int64)
        return np.searchsorted(facets.astype(np.int64) @ place, wanted @ place)
    first_two = np.array([n, 1], dtype=np.int64)
    pair, where = np.unique(facets[:, :2].astype(np.int64) @ first_two, return_inverse=True)
    keys = where.astype(np.int64) * n + facets[:, 2]
    return np.searchsorted(keys, np.searchsorted(pair, wanted[:, :2] @ first_two) * n + wanted[:, 2])


def _conduction(dim, cell_facets, cell_conductance, n, links, link_strength) -> sparse.csr_array:
    pairs = cell_pairs(dim)
    narrow, links = cell_facets.astype(np.int32), links.astype(np.int32)  # half the memory, at its peak here
    first = np.concatenate([narrow[:, pairs[:, 0]].T.ravel(), links[:, 0]])
    second = np.concatenate([narrow[:, pairs[:, 1]].T.ravel(), links[:, 1]])
    g = np.concatenate([(dim**2 * cell_conductance).ravel(), link_strength])
    diagonal = np.bincount(first, g, n) + np.bincount(second, g, n)
    upper = sparse.coo_array((-g, (np.minimum(first, second), np.maximum(first, second))), shape=(n, n)).tocsr()
    return (upper + upper.T + sparse.diags_array(diagonal)).tocsr()


def _loads(mesh, given, cell_facets, exterior, n) -> tuple[np.ndarray, np.ndarray]:
    """Return the facet loads and the energy of the flux (f / dim)(x - x_c) in every cell."""
    load = np.zeros(n)
    energy = np.zeros(mesh.n_cells)
    dim = mesh.dim
    if np.any(given.source):
        measure = signed_measure(mesh.points, mesh.cells)
        weight = TURN * mesh.points[mesh.cells, 0].mean(axis=1) if mesh.axisymmetric else 1.0
        heat = given.source * measure * weight
        load += np.bincount(cell_facets.ravel(), np.repeat(heat / (dim + 1), dim + 1), n)
        arms = mesh.points[mesh.cells] - mesh.points[mesh.cells].mean(axis=1, keepdims=True)
        inverse = np.eye(dim)[None] if given.tensors is None else np.linalg.inv(given.tensors)[given.tensor_of(mesh)]
        spread = np.einsum("cia,cab,cib->c", arms, np.broadcast_to(inverse, (mesh.n_cells, dim, dim)), arms)
        moment = measure * weight * spread / ((dim + 1) * (dim + 2))
        energy = (given.source / dim) ** 2 * moment / given.conductivity
    if np.any(given.flux):
        length = facet_length(mesh.points, mesh.facets)
        if mesh.axisymmetric:
            length = length * TURN * mesh.points[mesh.facets, 0].mean(axis=1)
        load += np.bincount(exterior, length * given.flux, n)
    return load, energy


def _merged_sheets(given, facets) -> tuple[np.ndarray, np.ndarray]:
    """Return the facets that carry sheets and their conductance; several sheets on one facet add."""
    number = find_facets(facets, given.sheet_facets)
    order = np.argsort(number, kind="stable")
    number, start = np.unique(number[order], return_index=True)
    return number, np.add.reduceat(given.sheet_conductance[order], start)


def _with_sheets(mesh, network, facets, number, kt, from_nodes):
    """Replace the facets under sheets by sites of the sheets' own Crouzeix-Raviart fields."""
    n, dim = len(facets), mesh.dim
    nodes = facets[number]
    if dim == 2:
        ends, site_of = np.unique(nodes, return_inverse=True)
        site_of = site_of.reshape(nodes.shape)
        site_nodes = ends[:, None]
    else:
        edges = np.sort(nodes[:, [[1, 2], [2, 0], [0, 1]]].reshape(-1, 2), axis=1)
        site_nodes, site_of = np.unique(edges, axis=0, return_inverse=True)
        site_of = site_of.reshape(-1, 3)

    plain = np.ones(n, dtype=bool)
    plain[number] = False
    column = np.cumsum(plain) - 1
    n_plain, n_sites = int(plain.sum()), int(plain.sum()) + len(site_nodes)
    rows = np.concatenate([np.flatnonzero(plain), np.repeat(number, dim)])
    columns = np.concatenate([column[plain], n_plain + site_of.ravel()])
    data = np.concatenate([np.ones(n_plain), np.full(number.size * dim, 1.0 / dim)])
    spread = sparse.coo_array((data, (rows, columns)), shape=(n, n_sites)).tocsr()

    # In a section the sheet's sites are its ends and its field is linear between them; on a triangle the
    # sites are edge centres, where Crouzeix-Raviart gradients are -2 times those of the hat functions.
    factor = 1.0 if dim == 2 else 4.0
    in_plane = sheet_laplacian(n_plain + site_of, factor * sheet_weights(mesh, nodes, kt, harmonic=True), n_sites)
    fixed = np.full(n_sites, -1, dtype=np.int64)
    fixed[:n_plain] = network.fixed[plain]
    fixed[n_plain:] = _held_sites(facets[network.fixed >= 0], network.fixed[network.fixed >= 0], site_nodes)
    width = site_nodes.shape[1]
    average = sparse.csr_array(
        (np.full(site_nodes.size, 1.0 / width), site_nodes.ravel(), np.arange(0, site_nodes.size + 1, width)),
        shape=(len(site_nodes), mesh.n_nodes),
    )
    from_nodes = sparse.vstack([from_nodes[np.flatnonzero(plain)], average]).tocsr()
    changed = Network(
        matrix=(spread.T @ network.matrix @ spread + in_plane).tocsr(),
        exchange=(spread.T @ network.exchange).tocsr(),
        fixed=fixed,
        load=spread.T @ network.load,
        constant=network.constant,
        has_load=network.has_load,
    )
    return changed, spread, from_nodes, n_plain + site_of


def _held_sites(fixed_facets: np.ndarray, terminal: np.ndarray, site_nodes: np.ndarray) -> np.ndarray:
    """Return the terminal of sheet sites that lie on fixed faces, where the sheet ends or runs along, else -1.

    Parameters
    ----------
    fixed_facets, terminal
        Sorted nodes of facets with fixed temperature, (n, dim), and their terminals, (n,).
    site_nodes
        Node (section) or sorted edge nodes (3D) of each sheet site, (n_sites, dim - 1).
    """
    width = site_nodes.shape[1]
    parts = fixed_facets if width == 1 else fixed_facets[:, [[0, 1], [0, 2], [1, 2]]]
    parts = parts.reshape(-1, width).astype(np.int64)
    owner = np.repeat(terminal, len(parts) // max(len(terminal), 1))
    rows = np.vstack([parts, site_nodes])
    _, same = np.unique(rows, axis=0, return_inverse=True)
    same = same.ravel()
    table = np.full(same.max() + 1, -1, dtype=np.int64)
    table[same[: len(parts)]] = owner
    return table[same[len(parts) :]]
