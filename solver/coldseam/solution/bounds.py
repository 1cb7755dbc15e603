"""Two-sided bounds of heat flows, and where in the mesh their gap arises.

Let Lambda be the exact quadratic form of a heat network (see volumes/network.py). The node field
gives ``Lambda <= high`` (Dirichlet's principle), the facet flux ``low <= Lambda`` (Thomson's), both
for every state x, that is in the order of symmetric matrices. With the middle M and the gap
``W = high - low`` any bilinear reading obeys

    | a.Lambda b - a.M b |  <=  1/2 sqrt(a.W a) sqrt(b.W b)

(Cauchy-Schwarz for the semidefinite form Lambda - low and high - Lambda). A boundary's heat flow is
such a reading, with a the unit vector of its terminal and b the state.

Algebraic error: the node energies are evaluated, not assumed minimal, so an unfinished node solve
only widens the upper side. An unfinished facet solve leaves a flux that is not divergence-free;
its energy is above the minimum by the squared energy norm of the error, whose upper estimate is
subtracted. Round-off: both sides move out by ``ROUND_OFF`` of the terms that were summed.

References: Prager, Synge 1947, Quart. Appl. Math. 5, 241; Marini 1985, SIAM J. Numer. Anal. 22, 493.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from coldseam.errors import SolveError
from coldseam.mesh.measure import cell_measure
from coldseam.mesh.types import Mesh
from coldseam.solution.linear import DIRECT_LIMIT, DirectSolver, MultigridSolver, facet_hierarchy, node_hierarchy
from coldseam.solution.respond import Response, respond
from coldseam.volumes.conditions import Conditions
from coldseam.volumes.facets import FacetSystem, facet_system, sheet_heat
from coldseam.volumes.operator import cell_pairs
from coldseam.volumes.section import cell_radius, facet_length, facet_shares, harmonic_radius_of_cells
from coldseam.volumes.sheets import sheet_pairs, sheet_weights

FACET_TOLERANCE = 1e-10
ROUND_OFF = 1e-12
IDENTITY_TOLERANCE = 1e-6  # of the energy: how well the gap must equal the sum of its local parts


@dataclass(frozen=True, kw_only=True, eq=False)
class Bounds:
    """Bounds of a network's quadratic form.

    Parameters
    ----------
    high, low
        Symmetric matrices with ``low <= Lambda <= high``, W/K, (n_terminals [+ 1],) squared.
    middle
        The mean of the two networks' own forms, W/K, same shape. Their errors are of opposite sign and
        much alike, so it is a better estimate than either; being the mean of two balances it balances.
    facets
        The facet system and its unit fields.
    response
        The facet network's solution.
    """

    high: np.ndarray
    low: np.ndarray
    middle: np.ndarray
    facets: FacetSystem
    response: Response

    def estimate(self, reading: np.ndarray, state: np.ndarray) -> float:
        """Return the best estimate of ``reading . Lambda . state``, both (n_terminals [+ 1],)."""
        return float(reading @ self.middle @ state)

    def interval(self, reading: np.ndarray, state: np.ndarray) -> tuple[float, float]:
        """Return the interval of ``reading . Lambda . state``, both (n_terminals [+ 1],)."""
        gap = self.high - self.low
        middle = 0.5 * reading @ (self.high + self.low) @ state
        half = 0.5 * np.sqrt(max(reading @ gap @ reading, 0.0) * max(state @ gap @ state, 0.0))
        return float(middle - half), float(middle + half)


def prove(
    mesh: Mesh, given: Conditions, weights: np.ndarray, nodes: Response, tolerance: float = FACET_TOLERANCE
) -> Bounds:
    """Solve the facet network and return the bounds of the heat flows.

    Parameters
    ----------
    mesh, given
        Mesh and conditions.
    weights
        Plain cell weights, (3 or 6, n_cells).
    nodes
        The node network's solution.
    tolerance
        Missing energy of the facet fields as a part of each field's own; the lower bound is lowered by ten times that.

    Raises
    ------
    SolveError
        The facet solve failed, or its flux fails the check of :func:`check_gap`.
    """
    system = facet_system(mesh, given, weights)
    solver = facet_solver(system, nodes, mesh.dim, given.uneven)
    response = respond(system.network, mesh.dim, tolerance, solver, lambda: system.from_nodes @ nodes.fields)
    return bounds_of(mesh, given, system, nodes, response)


def bounds_of(mesh: Mesh, given: Conditions, system: FacetSystem, nodes: Response, response: Response) -> Bounds:
    """Return the bounds that a node response and a facet response give."""
    high = nodes.network.energy(nodes.fields)
    low = system.network.energy(response.fields)
    if len(system.sheet_facets):
        values = system.spread @ response.fields
        heat = sheet_heat(system, values, np.eye(len(low)))
        low -= heat.T @ (system.sheet_moment[:, None] * heat)
    middle = 0.5 * (high + low)
    low = low - len(low) * np.diag(response.error_energy)
    scale = np.concatenate(
        [np.asarray(nodes.network.exchange.sum(axis=0)), high.diagonal()[nodes.network.n_terminals :]]
    )
    margin = ROUND_OFF * (np.abs(scale) + np.abs(high.diagonal()))
    return Bounds(
        high=high + np.diag(margin), low=low - np.diag(margin), middle=middle, facets=system, response=response
    )


def facet_fields(mesh: Mesh, given: Conditions, bounds: Bounds) -> np.ndarray:
    """Return the facet network's unit fields at the nodes, K per K, (n_nodes, n_terminals [+ 1]); NaN where they tell nothing.

    Under a film a node gets the mean of its facets' values, each by area times conductivity: what they exchange heat with.
    Elsewhere the fields are linear in every cell, and a node gets the mean of its cells, each by volume times conductivity
    (as Ainsworth 2005, SIAM J. Numer. Anal. 42, 2320, averages; from memory): across a jump of the conductivity the better
    conductor's value holds, where the field is smooth. A section that reaches its axis gets none: cells there are left out
    of the facet network, and what is beside them is far off.
    """
    fields = np.full((mesh.n_nodes, bounds.response.fields.shape[1]), np.nan)
    harmonic = harmonic_radius_of_cells(mesh)
    if harmonic is not None and np.any(harmonic <= 0.0):
        return fields
    volume, corners = np.repeat(cell_measure(mesh) * given.conductivity, mesh.dim + 1), mesh.cells.ravel()
    films = np.flatnonzero(given.film > 0)
    area = facet_length(mesh.points, mesh.facets[films]) * given.conductivity[mesh.facet_cell[films]]
    area, ends = np.repeat(area, mesh.dim), mesh.facets[films].ravel()
    inside, outside = (np.bincount(nodes, weight, mesh.n_nodes) for nodes, weight in ((corners, volume), (ends, area)))
    total = np.where(outside > 0.0, outside, inside)
    for number, field in enumerate((bounds.facets.spread @ bounds.response.fields).T):
        values = field[bounds.facets.cell_facets]
        at_corner = values.sum(axis=1, keepdims=True) - mesh.dim * values  # facet k lies opposite node k
        at_facet = np.repeat(field[bounds.facets.exterior[films]], mesh.dim)
        summed = np.where(
            outside > 0.0,
            np.bincount(ends, area * at_facet, mesh.n_nodes),
            np.bincount(corners, volume * at_corner.ravel(), mesh.n_nodes),
        )
        np.divide(summed, total, out=fields[:, number], where=total > 0.0)
    return fields


def facet_solver(system: FacetSystem, nodes: Response, dim: int, uneven: bool):
    """Return a solver of the facet system's free sites: direct when small, else on top of the nodes' hierarchy."""
    free = system.network.free
    matrix = system.network.free_matrix
    if matrix.shape[0] <= 2 * DIRECT_LIMIT[dim]:
        return DirectSolver(_regular(matrix))
    hierarchy = nodes.hierarchy
    free_nodes = nodes.network.free
    if hierarchy is None:
        hierarchy = node_hierarchy(nodes.network.free_matrix, uneven)
    matrix = _regular(matrix)
    return MultigridSolver(matrix, facet_hierarchy(matrix, system.from_nodes[free][:, free_nodes], hierarchy))


def _regular(matrix):
    """Give sites that nothing reaches (cells left out along an axis) a conductance, so that they read 0."""
    diagonal = matrix.diagonal()
    lonely = diagonal <= 0.0
    if not lonely.any():
        return matrix
    from scipy import sparse

    return (matrix + sparse.diags_array(np.where(lonely, np.median(diagonal[~lonely]), 0.0))).tocsr()


def local_gap(
    mesh: Mesh, given: Conditions, weights: np.ndarray, nodes: Response, bounds: Bounds, state: np.ndarray
) -> np.ndarray:
    """Return each cell's part of the energy gap of a state, W K, (n_cells,).

    By the identity of Prager and Synge the gap between the two energies is the distance of the two
    fluxes, ``sum over cells of |q_facet + K grad T_node|²`` in the norm of K^-1, with a like term for
    every film, contact and sheet facet, which here are added to the cell behind.

    Parameters
    ----------
    state
        Terminal temperatures and load scale, (n_terminals [+ 1],).
    """
    system = bounds.facets
    temperature = nodes.fields @ state
    values = system.spread @ (bounds.response.fields @ state)
    gap = _cell_gap(mesh, given, weights, temperature, values[system.cell_facets])
    if nodes.network.has_load:
        gap = gap + system.load_energy * state[-1] ** 2

    films = np.flatnonzero(given.film > 0)
    outside = state[given.terminal[films]]
    shares = facet_shares(mesh, mesh.facets[films]) * given.film[films, None]
    fall = temperature[mesh.facets[films]] - outside[:, None]
    step = values[system.exterior[films]] - outside
    part = (shares * fall**2).sum(axis=1) + system.film_strength[films] * (step**2 - 2.0 * step * fall.mean(axis=1))
    gap = gap + np.bincount(mesh.facet_cell[films], part, mesh.n_cells)
    for facets, part in (
        _contact_gap(mesh, given, system, temperature, values),
        _sheet_gap(mesh, system, temperature, bounds.response.fields @ state, values, state),
    ):
        gap = gap + _at_cells(mesh, system, facets, part)
    return gap


def _cell_gap(mesh, given, weights, temperature, facet_values) -> np.ndarray:
    pairs = cell_pairs(mesh.dim)
    t = temperature[mesh.cells]
    node_step = t[:, pairs[:, 0]] - t[:, pairs[:, 1]]
    facet_step = -mesh.dim * (facet_values[:, pairs[:, 0]] - facet_values[:, pairs[:, 1]])
    k = given.conductivity * weights  # gradients of the facet field enter as -dim times differences
    radius, harmonic = cell_radius(mesh), harmonic_radius_of_cells(mesh)
    node_k, facet_k = (k, k) if radius is None else (k * radius, k * harmonic)
    return (
        np.einsum("pc,cp->c", node_k, node_step**2)
        + np.einsum("pc,cp->c", facet_k, facet_step**2)
        - 2.0 * np.einsum("pc,cp->c", facet_k, node_step * facet_step)
    )


def _contact_gap(mesh, given, system, temperature, values) -> tuple[np.ndarray, np.ndarray]:
    """Return the contacts' facets and their parts of the gap."""
    if not len(system.link_facets):
        return np.empty(0, dtype=np.int64), np.empty(0)
    shares = facet_shares(mesh, mesh.links[:, 0]) * given.link_conductance[:, None]
    fall = temperature[mesh.links[:, 0]] - temperature[mesh.links[:, 1]]
    step = values[system.link_facets[:, 0]] - values[system.link_facets[:, 1]]
    part = (shares * fall**2).sum(axis=1) + system.link_strength * (step**2 - 2.0 * step * fall.mean(axis=1))
    return system.link_facets[:, 0], part


def _sheet_gap(mesh, system, temperature, sites, values, state) -> tuple[np.ndarray, np.ndarray]:
    """Return the facets under sheets and their parts of the gap: the two in-plane fluxes compared."""
    facets = system.sheet_facets
    if not len(facets):
        return facets, np.empty(0)
    nodes, pairs = system.facets[facets], sheet_pairs(mesh.dim)
    node_g = sheet_weights(mesh, nodes, system.sheet_conductance)
    facet_g = sheet_weights(mesh, nodes, system.sheet_conductance, harmonic=True)
    t, u = temperature[nodes], sites[system.sheet_sites] * (1.0 if mesh.dim == 2 else -2.0)
    node_step = (t[:, pairs[:, 0]] - t[:, pairs[:, 1]]).T
    facet_step = (u[:, pairs[:, 0]] - u[:, pairs[:, 1]]).T
    heat = sheet_heat(system, values[:, None], state[:, None])[:, 0]
    part = node_g * node_step**2 + facet_g * (facet_step**2 - 2.0 * node_step * facet_step)
    return facets, part.sum(axis=0) + system.sheet_moment * heat**2


def _at_cells(mesh: Mesh, system: FacetSystem, facets: np.ndarray, part: np.ndarray) -> np.ndarray:
    """Add parts of facets to a cell that has the facet, (n_cells,)."""
    owner = np.zeros(len(system.facets), dtype=np.int64)
    owner[system.cell_facets.ravel()] = np.repeat(np.arange(mesh.n_cells), mesh.dim + 1)
    return np.bincount(owner[facets], part, mesh.n_cells)


def check_gap(gap: np.ndarray, bounds: Bounds, state: np.ndarray) -> float:
    """Return the relative misfit between the gap of a state (n_terminals [+ 1],) and its local parts, W K, (n_cells,).

    The identity holds only if the facet flux truly balances and the matrices are what they should
    be: a flux that is not divergence-free, or a solve looser than it says, breaks it. What the solver
    owns up to may show: an error e in the facet field changes the sum by at most ``2 |e| sqrt(gap)``
    plus the widening of the lower bound.

    Raises
    ------
    SolveError
        The misfit is above ``IDENTITY_TOLERANCE`` of the energy and what the solver's error explains.
    """
    whole = float(state @ (bounds.high - bounds.low) @ state)
    energy = float(np.abs(state @ bounds.high @ state)) + 1e-300
    misfit = abs(whole - float(gap.sum())) / energy
    owned = len(state) * float(state**2 @ bounds.response.error_energy)
    if misfit > IDENTITY_TOLERANCE + (2.0 * np.sqrt(owned * max(whole, 0.0)) + owned) / energy:
        raise SolveError(
            f"the proof of the heat flows does not close: the two fluxes differ by {misfit:.1e} of the energy more than "
            "their energies allow; the result is refused"
        )
    return misfit


def cell_sizes(mesh: Mesh) -> np.ndarray:
    """Return the mean edge length of every cell, m, (n_cells,)."""
    pairs = cell_pairs(mesh.dim)
    p = mesh.points[mesh.cells]
    return np.linalg.norm(p[:, pairs[:, 0]] - p[:, pairs[:, 1]], axis=2).mean(axis=1)
