"""The steady temperature field of a case on one mesh, with every boundary's heat flow."""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np
from scipy.sparse.csgraph import connected_components

from coldseam.errors import CaseError, Fault, SolveError
from coldseam.mesh.boundaries import claim_facets
from coldseam.mesh.contacts import open_contacts
from coldseam.mesh.locate import interpolate
from coldseam.mesh.measure import cell_measure
from coldseam.mesh.types import Mesh
from coldseam.solution.balance import at_balance, floating_names, held_at_guess
from coldseam.solution.bounds import Bounds, facet_fields
from coldseam.solution.coefficients import depends, facing_air
from coldseam.solution.nonlinear import Settled, settle
from coldseam.solution.respond import Response, respond
from coldseam.volumes.conditions import Conditions, body_mask, conditions
from coldseam.volumes.network import Network
from coldseam.volumes.nodes import node_network, node_operator
from coldseam.volumes.section import facet_shares

if TYPE_CHECKING:
    from coldseam.case.model import Case

NODE_TOLERANCE = 1e-13
MOST_BALANCES = 30
BALANCED = 1e-4  # K
CLOSURE_LIMIT = 1e-4
"""ISO 10211: the sum of the heat flows over half the sum of their absolute values."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Steady:
    """A solved steady case on one mesh.

    Parameters
    ----------
    case, mesh, facet_boundary, given
        The case, its mesh with contacts opened, the boundary of each facet, the conditions.
    weights
        Plain cell weights, (3 or 6, n_cells).
    response
        Unit fields of the node network.
    state
        Terminal temperatures less ``reference``, then 1 for the loads if there are any.
    reference
        °C.
    temperature
        At the nodes, °C, (n_nodes,).
    boundary_flow
        Heat flow into the solid of every boundary, W (2D: W/m), (n_boundaries,).
    source_flow
        Heat released in the bodies, W (2D: W/m).
    bounds
        Bounds of the heat flows; None where they were not asked for.
    settled
        How coefficients that depend on the temperatures were found; None where none do.
    remarks
        What is to be said of the machines of floating spaces.
    """

    case: Case
    mesh: Mesh
    facet_boundary: np.ndarray
    given: Conditions
    weights: np.ndarray
    response: Response
    state: np.ndarray
    reference: float
    temperature: np.ndarray
    boundary_flow: np.ndarray
    source_flow: float
    bounds: Bounds | None = None
    settled: Settled | None = None

    @property
    def possible(self) -> tuple[float, float]:
        """Lowest and highest temperature that the causes permit, °C: those outside, where no heat is released or drawn."""
        outside = self.state[: len(self.given.terminals)] + self.reference
        heat = np.concatenate([self.given.source, self.given.flux])
        low = -np.inf if np.any(heat < 0) else float(outside.min())
        return low, np.inf if np.any(heat > 0) else float(outside.max())

    @cached_property
    def read_fields(self) -> np.ndarray:
        """Unit fields by which temperatures are read, K per K, (n_nodes, n_terminals [+ 1]): both networks' mean.

        As with the heat flows, the networks' errors are of opposite sign and much alike (the nodes conduct too well, the
        facets too badly), so the mean is nearer than either: a bar's end in ISO 10211 case 4 was 0.005 K off with
        22 000 nodes, the mean 0.004 K with 2 400.
        """
        fields = self.response.fields
        if self.bounds is None:
            return fields
        other = facet_fields(self.mesh, self.given, self.bounds)
        known = self.response.network.free & np.isfinite(other).all(axis=1)
        return np.where(known[:, None], 0.5 * (fields + other), fields)

    @cached_property
    def read_temperature(self) -> np.ndarray:
        """The temperature as it is read, °C, (n_nodes,): from :attr:`read_fields`, held within what is possible.

        Badly shaped cells can lift a node of a coarse mesh beyond it. The exact field keeps to it (maximum
        principle), so holding a node there only brings it nearer. Heat flows come from ``temperature``.
        """
        return np.clip(self.reference + self.read_fields @ self.state, *self.possible)

    remarks: tuple[str, ...] = ()

    @property
    def closure(self) -> float:
        """Sum of all heat flows, W (2D: W/m); zero but for the solver's tolerance."""
        return float(self.boundary_flow.sum() + self.source_flow)

    @property
    def throughput(self) -> float:
        """Half the sum of the absolute heat flows: what passes through the model, W (2D: W/m)."""
        return float(0.5 * (np.abs(self.boundary_flow).sum() + abs(self.source_flow)))

    @property
    def relative_closure(self) -> float:
        """Closure as a part of the throughput; 0 where nothing flows."""
        floor = 1e-12 * float(self.response.network.exchange.sum() + self.response.network.matrix.diagonal().max())
        return abs(self.closure) / self.throughput if self.throughput > floor else 0.0


def solve_on(case: Case, mesh: Mesh, before: Steady | None = None) -> Steady:
    """Solve a steady case on a mesh.

    Where coefficients depend on the temperatures they are iterated first; what is solved and proven then is the
    linear problem with the coefficients frozen at the solution.

    Parameters
    ----------
    case
        The case.
    mesh
        A mesh of its geometry, contacts not yet opened.
    before
        The solution on another mesh of it, for the iteration to start from.

    Raises
    ------
    CaseError
        Boundaries that don't fit the surface, bodies that no temperature reaches, unknown contacts.
    SolveError
        No convergence, or a balance that does not close.
    """
    facet_boundary = claim_facets(case, mesh)
    mesh = with_contacts(case, mesh)
    remarks: tuple[str, ...] = ()
    if floating_names(case) and depends(case):
        case, remarks = _at_balance_of_laws(case, mesh, facet_boundary)
    floats = floating_names(case)
    given = conditions(held_at_guess(case) if floats else case, mesh, facet_boundary)
    operator, weights = node_operator(mesh, given)
    network = node_network(mesh, given, operator)
    require_temperatures(mesh, network)
    settled = None
    if depends(case):
        start = None if before is None else interpolate(before.mesh, before.temperature[:, None], mesh.points)[:, 0]
        settled = settle(case, mesh, facet_boundary, given, operator, start)
        given = settled.given
        if given.turned:
            operator, weights = node_operator(mesh, given)
        network = node_network(mesh, given, operator)
    alike = before is not None and before.response.network.has_load == network.has_load  # as many unit fields
    guess = _from(before, mesh) if alike else None
    response = respond(network, mesh.dim, NODE_TOLERANCE, guess=guess, uneven=given.uneven)

    temperatures = np.array([terminal.temperature for terminal in given.terminals])
    if floats:
        case, temperatures, remarks = at_balance(case, given, response)
        moved = zip(given.terminals, temperatures.tolist(), strict=True)
        given = replace(given, terminals=tuple(replace(terminal, temperature=t) for terminal, t in moved))
    reference = 0.5 * float(temperatures.min() + temperatures.max())
    state = np.append(temperatures - reference, [1.0] * network.has_load)
    relative = response.fields @ state
    result = Steady(
        case=case,
        mesh=mesh,
        facet_boundary=facet_boundary,
        given=given,
        weights=weights,
        response=response,
        state=state,
        reference=reference,
        temperature=relative + reference,
        boundary_flow=boundary_flows(mesh, facet_boundary, given, network, relative, state, len(case.boundary)),
        source_flow=float(given.source @ cell_measure(mesh)),
        settled=settled,
        remarks=remarks,
    )
    if result.relative_closure > CLOSURE_LIMIT:
        raise SolveError(
            f"the heat balance does not close: the flows add up to {result.closure:.3g} W, {result.relative_closure:.1e} of "
            f"what passes through ({CLOSURE_LIMIT:.0e} is allowed, ISO 10211); the result is refused"
        )
    return result


def _at_balance_of_laws(case: Case, mesh: Mesh, facet_boundary: np.ndarray) -> tuple[Case, tuple[str, ...]]:
    """Return the case with floating spaces held where they balance, films and conductivities being those at the balance."""
    found, remarks = held_at_guess(case), ()
    field = None
    for _ in range(MOST_BALANCES):
        air = {name: space.temperature for name, space in found.spaces.items()}
        given = conditions(found, mesh, facet_boundary)
        operator, _ = node_operator(mesh, given)
        require_temperatures(mesh, node_network(mesh, given, operator))
        settled = settle(found, mesh, facet_boundary, given, operator, field)
        field = settled.temperature
        given = facing_air(found, settled.given, air)
        response = respond(node_network(mesh, given, operator), mesh.dim, NODE_TOLERANCE, uneven=given.uneven)
        found, _, remarks = at_balance(case, given, response)
        moves = [abs(space.temperature - air[name]) for name, space in found.spaces.items()]
        if max(moves) <= BALANCED:
            return found, remarks
    moving = list(found.spaces)[int(np.argmax(moves))]
    raise SolveError(
        f'the temperature of the floating space "{moving}" did not settle with the films that depend on it: it still moves '
        f"by {max(moves):.2g} K after {MOST_BALANCES} rounds"
    )


def _from(before: Steady, mesh: Mesh):
    return lambda: interpolate(before.mesh, before.response.fields, mesh.points)


def with_contacts(case: Case, mesh: Mesh) -> Mesh:
    """Return the mesh opened along the case's contacts.

    Raises
    ------
    CaseError
        The two bodies of a contact share no face.
    """
    if not case.contact:
        return mesh
    pairs = [tuple(body_mask(case, mesh, name) for name in contact.between) for contact in case.contact]
    try:
        return open_contacts(mesh, pairs)
    except ValueError as error:
        number = int(error.args[0])
        first, second = case.contact[number].between
        what = f'"{first}" and "{second}" share no face; a contact needs two bodies that touch'
        raise CaseError([Fault(path=("contact", number, "between"), what=what)]) from error


def require_temperatures(mesh: Mesh, network: Network) -> None:
    """Raise a CaseError that names the bodies which no boundary with a temperature reaches."""
    _, part = connected_components(network.matrix, directed=False)
    held = (network.fixed >= 0) | (np.diff(network.exchange.indptr) > 0)
    reached = np.zeros(part.max() + 1, dtype=bool)
    reached[part[held]] = True
    floating = ~reached[part[mesh.cells[:, 0]]]
    if floating.any():
        names = sorted({mesh.bodies[b].name for b in np.unique(mesh.cell_body[floating])})
        text = ", ".join(f'"{name}"' for name in names)
        raise CaseError(
            [
                Fault(
                    path=("boundary",),
                    what=f"no temperature reaches {text}: not joined to any face that meets a space or has a temperature; "
                    "let it touch another body or give one of its faces a space or a temperature",
                )
            ]
        )


def boundary_flows(
    mesh, facet_boundary, given: Conditions, network: Network, relative, state, n_boundaries
) -> np.ndarray:
    """Return the heat flow into the solid of every boundary from nodal balances, W (2D: W/m), (n_boundaries,).

    Films: the sum of ``h A_i (T_space - T_i)``. Fixed faces: what the balance of their nodes lacks; a
    node shared by several boundaries of one fixed group is split by their shares of its area.

    Parameters
    ----------
    relative, state
        Node and terminal temperatures less the reference.
    """
    shares = facet_shares(mesh, mesh.facets)
    flow = np.zeros(n_boundaries)
    films = given.film > 0
    fall = state[given.terminal[films], None] - relative[mesh.facets[films]]
    flow += np.bincount(facet_boundary[films], given.film[films] * (shares[films] * fall).sum(axis=1), n_boundaries)
    flow += np.bincount(facet_boundary, given.flux * shares.sum(axis=1), n_boundaries)

    is_fixed = np.array([terminal.fixed for terminal in given.terminals])
    fixed = (given.terminal >= 0) & ~films
    fixed[fixed] &= is_fixed[given.terminal[fixed]]
    if not fixed.any():
        return flow
    lacking = (
        network.matrix @ relative - network.exchange @ state[: network.n_terminals] - network.load * network.has_load
    )
    nodes, owner = mesh.facets[fixed], np.repeat(facet_boundary[fixed], mesh.dim).reshape(-1, mesh.dim)
    area = np.bincount(nodes.ravel(), shares[fixed].ravel(), mesh.n_nodes)
    part = shares[fixed] / np.where(area > 0, area, 1.0)[nodes] * lacking[nodes]
    return flow + np.bincount(owner.ravel(), part.ravel(), n_boundaries)
