"""The heat network over time: node temperatures T, spaces and goods y, and what drives them.

    C dT/dt = b + B t(time) + G y - A T        (nodes; those with a fixed temperature follow their schedule)
    D dy/dt = s(y, time) + G'T - diag(sum G) y (floating spaces and goods)

A, b and the film conductances to the terminals are those of the steady network; G gathers the columns of the
terminals that a floating space stands behind, B keeps the others. Heat flows are read from the same balances.
The sun is a further column of B for each sunlit boundary, absorptivity times area of every node, and its irradiance
a further entry of t: so it is integrated as exactly as the temperatures outside.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from scipy import sparse

from coldseam.case.overtime import held
from coldseam.case.schedules import Schedule, span_of, value_at
from coldseam.errors import CaseError, Fault
from coldseam.mesh.boundaries import claim_facets
from coldseam.mesh.measure import cell_measure
from coldseam.mesh.types import Mesh
from coldseam.solution.spaces import Spaces, floating_spaces, outside_range
from coldseam.solution.steady import require_temperatures, with_contacts
from coldseam.volumes.capacity import node_capacities
from coldseam.volumes.conditions import Conditions, conditions
from coldseam.volumes.network import Network
from coldseam.volumes.nodes import node_network, node_operator
from coldseam.volumes.operator import EdgeOperator
from coldseam.volumes.section import facet_shares

if TYPE_CHECKING:
    from coldseam.case.films import Sun
    from coldseam.case.model import Case


@dataclass(frozen=True, kw_only=True, eq=False)
class HeatSystem:
    """The equations of a case over time on one mesh.

    Parameters
    ----------
    case, mesh, facet_boundary, given, network
        The case, its mesh with contacts opened, the boundary of every facet, conditions and steady network.
    capacity
        J/K of every node, (n_nodes,); specific heats over temperature at the middle of what the case names.
    spaces
        The unknowns outside the mesh.
    coupling
        G: film conductance between nodes and the unknowns outside, W/K, (n_nodes, n).
    gather, films
        Its transpose, and its sum over the nodes, W/K, (n,).
    drive
        B: that between nodes and the terminals with a given temperature, W/K, then what nodes absorb of the sun on
        each sunlit boundary, m², (n_nodes, n_terminals + n_sunlit).
    terminal_course
        Temperature (°C, or a schedule) of every terminal, None for a floating one; then the irradiances, W/m².
    readers
        How boundary flows are read, see :class:`FlowReaders`.
    source_flow
        Heat released in bodies, W.
    operator
        By which new conductivities make a new matrix.
    """

    case: Case
    mesh: Mesh
    facet_boundary: np.ndarray
    given: Conditions
    network: Network
    capacity: np.ndarray
    spaces: Spaces
    coupling: sparse.csr_array
    gather: sparse.csr_array
    films: np.ndarray
    drive: sparse.csr_array
    terminal_course: tuple[float | Schedule | None, ...]
    readers: FlowReaders
    source_flow: float
    operator: EdgeOperator

    @property
    def free(self) -> np.ndarray:
        """Mask of the nodes whose temperature is an unknown, (n_nodes,)."""
        return self.network.free

    @property
    def whole(self) -> HeatSystem:
        """The equations of all nodes: these, or what a reduced system stands for."""
        return self

    def expand(self, temperature: np.ndarray) -> np.ndarray:
        """Return the mesh's node temperatures, °C, (n_nodes,): these, or what a reduced system's unknowns stand for."""
        return temperature

    def reading(self, weights: sparse.csr_array) -> sparse.csr_array | np.ndarray:
        """Return what reads from the unknowns what weights, (n, n_nodes), read from node temperatures."""
        return weights

    def largest(self, change: np.ndarray) -> float:
        """Return the largest change of a node's temperature, K, of changes of the free unknowns, (n_free,)."""
        return float(np.max(np.abs(change), initial=0.0))

    def terminals(self, time: float, *, before: bool = False) -> np.ndarray:
        """Return every terminal's temperature, °C, 0 for floating ones, then irradiances, (n_terminals + n_sunlit,)."""
        return np.array([0.0 if c is None else value_at(c, time, before=before) for c in self.terminal_course])

    def with_fixed(self, temperature: np.ndarray, terminals: np.ndarray) -> np.ndarray:
        """Return a copy of node temperatures with the fixed ones set, °C, (n_nodes,)."""
        fixed = ~self.free
        result = temperature.copy()
        result[fixed] = terminals[self.network.fixed[fixed]]
        return result

    def node_heat(self, temperature: np.ndarray, y: np.ndarray, terminals: np.ndarray) -> np.ndarray:
        """Return the heat that flows into every control volume, W, (n_nodes,); at fixed nodes what they pass on."""
        heat = self.drive @ terminals - self.network.matrix @ temperature
        if self.spaces.n:
            heat += self.coupling @ y
        return heat + self.network.load if self.network.has_load else heat

    def space_heat(
        self, temperature: np.ndarray, y: np.ndarray, flows: np.ndarray, time: float, *, before: bool
    ) -> np.ndarray:
        """Return the heat that flows into every unknown outside the mesh, W, (n,)."""
        own = self.spaces.heat(flows, y, time, before=before)
        return own + self.gather @ temperature - self.films * y

    def corners(self, start: float, end: float) -> list[float]:
        """Return the times (s) between start and end at which a step must end."""
        from coldseam.case.overtime import schedules

        found = self.spaces.corners(start, end)
        for _, schedule in schedules(self.case):
            found += schedule.corners(start, end)
        return sorted(set(found))

    def boundary_flows(
        self, temperature: np.ndarray, y: np.ndarray, terminals: np.ndarray, node_heat: np.ndarray
    ) -> np.ndarray:
        """Return every boundary's heat flow into the solid, W, (n_boundaries,), less what fixed nodes store."""
        r = self.readers
        outside = np.where(r.unknown >= 0, y[r.unknown] if self.spaces.n else 0.0, terminals[r.terminal])
        flow = r.constant + r.film * outside - r.film_nodes @ temperature
        flow[list(r.sunlit)] += r.sunlit_area * terminals[len(terminals) - len(r.sunlit) :]
        return flow - r.fixed_nodes @ node_heat if r.fixed_nodes.nnz else flow


@dataclass(frozen=True, kw_only=True, eq=False)
class FlowReaders:
    """What turns temperatures into the heat flows of boundaries.

    Parameters
    ----------
    constant
        Given heat flows, W, (n_boundaries,).
    film
        Sum of the film conductances, W/K, (n_boundaries,).
    film_nodes
        Film conductance of every node, W/K, (n_boundaries, n_nodes).
    fixed_nodes
        Share of a fixed node's balance that belongs to a boundary, (n_boundaries, n_nodes).
    terminal, unknown
        Terminal of every boundary (0 where none) and the floating space behind it (-1 where none).
    sunlit, sunlit_area
        Boundaries in the sun, and absorptivity times area of each, m², (n_sunlit,).
    """

    constant: np.ndarray
    film: np.ndarray
    film_nodes: sparse.csr_array
    fixed_nodes: sparse.csr_array
    terminal: np.ndarray
    unknown: np.ndarray
    sunlit: tuple[int, ...]
    sunlit_area: np.ndarray


def heat_system(case: Case, mesh: Mesh) -> HeatSystem:
    """Return the equations of a case with a ``[time]`` table on a mesh.

    Parameters
    ----------
    case
        The case.
    mesh
        A mesh of its geometry, contacts not yet opened.

    Raises
    ------
    CaseError
        Boundaries that don't fit the surface, bodies that no temperature reaches, or touching surfaces held at
        different temperatures.
    """
    facet_boundary = claim_facets(case, mesh)
    mesh = with_contacts(case, mesh)
    given = conditions(held_for_structure(case), mesh, facet_boundary)
    operator = node_operator(mesh, given)[0]
    network = node_network(mesh, given, operator)
    require_temperatures(mesh, network)
    spaces = floating_spaces(case)
    courses = (*_courses(case, given), *(sun.irradiance for _, sun in _sunlit(case)))
    behind = _behind(case, given, spaces)
    coupling, drive = _split(network.exchange, behind, spaces.n)
    drive = sparse.hstack([drive, sun_on_nodes(case, mesh, facet_boundary)], format="csr")
    return HeatSystem(
        case=case,
        mesh=mesh,
        facet_boundary=facet_boundary,
        given=given,
        network=network,
        capacity=node_capacities(case, mesh, 0.5 * sum(outside_range(case))),
        spaces=spaces,
        coupling=coupling,
        gather=sparse.csr_array(coupling.T),
        films=np.asarray(coupling.sum(axis=0)).ravel(),
        drive=drive,
        terminal_course=courses,
        readers=_readers(case, mesh, facet_boundary, given, behind),
        source_flow=float(given.source @ cell_measure(mesh)),
        operator=operator,
    )


def with_conditions(system: HeatSystem, given: Conditions) -> HeatSystem:
    """Return the equations with other coefficients: conductivities, films and sources that follow the temperature.

    Parameters
    ----------
    system
        The present equations.
    given
        New conditions with the same terminals; for a ``refresh`` of :class:`coldseam.solution.transient.Transient`.
    """
    network = node_network(system.mesh, given, system.operator)
    behind = _behind(system.case, given, system.spaces)
    coupling, drive = _split(network.exchange, behind, system.spaces.n)
    drive = sparse.hstack([drive, system.drive[:, network.n_terminals :]], format="csr")
    return replace(
        system,
        given=given,
        network=network,
        coupling=coupling,
        gather=sparse.csr_array(coupling.T),
        films=np.asarray(coupling.sum(axis=0)).ravel(),
        drive=drive,
        readers=_readers(system.case, system.mesh, system.facet_boundary, given, behind),
        source_flow=float(given.source @ cell_measure(system.mesh)),
    )


def held_for_structure(case: Case) -> Case:
    """Return a steady case with the same structure: equal temperatures exactly where the schedules are equal.

    Without the sun, which drives the nodes by itself; what surfaces radiate to keeps its schedules.
    """
    kinds: dict[object, float] = {}

    def stand_in(course: object) -> float:
        return kinds.setdefault(course, float(len(kinds)))

    middle = 0.5 * sum(outside_range(case))
    spaces = {name: middle if s.temperature is None else stand_in(s.temperature) for name, s in case.spaces.items()}
    surfaces = {n: stand_in(b.temperature) for n, b in enumerate(case.boundary) if b.temperature is not None}
    steady = held(case, spaces, surfaces)
    return steady.model_copy(update={"boundary": tuple(b.model_copy(update={"sun": None}) for b in steady.boundary)})


def _sunlit(case: Case) -> list[tuple[int, Sun]]:
    return [(number, boundary.sun) for number, boundary in enumerate(case.boundary) if boundary.sun is not None]


def sun_on_nodes(case: Case, mesh: Mesh, facet_boundary: np.ndarray) -> sparse.csr_array:
    """Return absorptivity times area of every node on each sunlit boundary, m², (n_nodes, n_sunlit).

    ``facet_boundary`` is the boundary of every exterior facet, (n_facets,).
    """
    shares = facet_shares(mesh, mesh.facets)
    columns = [
        sun.absorptivity * np.bincount(mesh.facets[own].ravel(), shares[own].ravel(), mesh.n_nodes)
        for number, sun in _sunlit(case)
        for own in (facet_boundary == number,)
    ]
    return sparse.csr_array(np.column_stack([np.zeros((mesh.n_nodes, 0)), *columns]))


def _course(case: Case, boundary):
    return boundary.temperature if boundary.temperature is not None else case.spaces[boundary.space].temperature


def _courses(case: Case, given: Conditions) -> tuple[float | Schedule | None, ...]:
    for first, second in given.clashes:
        names = [case.boundary[given.terminals[t].boundaries[0]] for t in (first, second)]
        spans = [span_of(_course(case, boundary)) for boundary in names]
        if spans[0] != spans[1] or spans[0][0] != spans[0][1]:
            what = (
                f'the surfaces "{names[0].name}" and "{names[1].name}" touch and are held at different temperatures, '
                "so the flow between them has no limit; give them films"
            )
            raise CaseError([Fault(path=("boundary", given.terminals[first].boundaries[0]), what=what)])
    # What a cavity's wall meets has no course of its own: a flux beside the film makes up for it (solution/refresh.py).
    return tuple(
        terminal.temperature if boundary.cavity is not None else _course(case, boundary)
        for terminal in given.terminals
        for boundary in (case.boundary[terminal.boundaries[0]],)
    )


def _behind(case: Case, given: Conditions, spaces: Spaces) -> np.ndarray:
    """Return the floating space behind every terminal, -1 where none."""
    names = [case.boundary[terminal.boundaries[0]].space for terminal in given.terminals]
    return np.array([spaces.names.index(name) if name in spaces.names else -1 for name in names])


def _split(exchange: sparse.csr_array, behind: np.ndarray, n: int) -> tuple[sparse.csr_array, sparse.csr_array]:
    floats = np.flatnonzero(behind >= 0)
    gather = sparse.csr_array((np.ones(len(floats)), (floats, behind[floats])), shape=(len(behind), n))
    keep = sparse.diags_array((behind < 0).astype(float))
    return sparse.csr_array(exchange @ gather), sparse.csr_array(exchange @ keep)


def _readers(case: Case, mesh: Mesh, facet_boundary: np.ndarray, given: Conditions, behind: np.ndarray) -> FlowReaders:
    count = len(case.boundary)
    shares = facet_shares(mesh, mesh.facets)
    films = given.film > 0
    shape = (count, mesh.n_nodes)
    rows = np.repeat(facet_boundary[films], mesh.dim)
    strength = (shares[films] * given.film[films, None]).ravel()
    film_nodes = sparse.coo_array((strength, (rows, mesh.facets[films].ravel())), shape=shape).tocsr()

    is_fixed = np.array([terminal.fixed for terminal in given.terminals])
    fixed = (given.terminal >= 0) & ~films
    fixed[fixed] &= is_fixed[given.terminal[fixed]]
    nodes = mesh.facets[fixed].ravel()
    area = np.bincount(nodes, shares[fixed].ravel(), mesh.n_nodes)
    part = shares[fixed].ravel() / area[nodes]
    fixed_nodes = sparse.coo_array((part, (np.repeat(facet_boundary[fixed], mesh.dim), nodes)), shape=shape).tocsr()

    terminal = np.full(count, 0)
    for number, entry in enumerate(given.terminals):
        terminal[list(entry.boundaries)] = number
    with_terminal = {b for entry in given.terminals for b in entry.boundaries}
    unknown = np.array([behind[terminal[b]] if b in with_terminal else -1 for b in range(count)])
    sunlit = _sunlit(case)
    area = np.bincount(facet_boundary, shares.sum(axis=1), count)
    return FlowReaders(
        constant=np.bincount(facet_boundary, given.flux * shares.sum(axis=1), count),
        film=np.asarray(film_nodes.sum(axis=1)).ravel(),
        film_nodes=film_nodes,
        fixed_nodes=fixed_nodes,
        terminal=terminal,
        unknown=unknown,
        sunlit=tuple(number for number, _ in sunlit),
        sunlit_area=np.array([sun.absorptivity * area[number] for number, sun in sunlit]),
    )
