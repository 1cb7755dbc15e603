"""What a run over time begins with: one temperature, one for each body, the steady state, or an earlier run."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
from scipy.spatial import cKDTree

from coldseam.case.overtime import at_moment, held
from coldseam.case.schedules import value_at
from coldseam.errors import CaseError, Fault, SolveError
from coldseam.mesh.types import Mesh
from coldseam.solution.balance import balance, guess, machine_remarks
from coldseam.solution.heatsystem import HeatSystem
from coldseam.solution.nonlinear import settle
from coldseam.solution.refresh import refresher
from coldseam.solution.respond import Response, respond
from coldseam.solution.spaces import outside_range
from coldseam.solution.steady import NODE_TOLERANCE
from coldseam.solution.stepper import State
from coldseam.volumes.conditions import conditions

if TYPE_CHECKING:
    from coldseam.case.model import Case

FINAL = "final_state.npz"
MOST_REPEATS, SETTLED = 40, 1e-3  # K


def starting_state(system: HeatSystem) -> State:
    """Return the state at time 0; coefficients of a steady start are those of its own temperatures.

    Raises
    ------
    CaseError
        A body without a temperature, or an earlier run that does not fit.
    """
    start = system.case.time.start
    if start == "steady":
        return _settled(system)
    if isinstance(start, Path):
        return _continued(system, start / FINAL)
    if isinstance(start, dict):
        temperature = _by_body(system, start)
        y = _spaces(system, start.get("rest", float(np.mean(temperature))))
    else:
        temperature, y = np.full(system.mesh.n_nodes, float(start)), _spaces(system, float(start))
    return State(time=0.0, temperature=temperature, y=y, running=_none_running(system))


def _none_running(system: HeatSystem) -> np.ndarray:
    return np.zeros(len(system.spaces.names), dtype=np.int64)


def _spaces(system: HeatSystem, otherwise: float) -> np.ndarray:
    """Return the start of spaces and goods: their own, or another temperature."""
    spaces = system.spaces
    y = [otherwise if spaces.floating(s).start is None else spaces.floating(s).start for s in range(len(spaces.names))]
    for s, g in spaces.goods:
        own = spaces.floating(s).goods[g].start
        y.append(y[s] if own is None else own)
    return np.array(y, dtype=float)


def _by_body(system: HeatSystem, table: dict[str, float]) -> np.ndarray:
    """Return node temperatures; a node that bodies share takes the mean weighted with their heat capacities."""
    from coldseam.volumes.capacity import volumetric_capacity
    from coldseam.volumes.section import node_shares_of_cells

    mesh = system.mesh
    values, faults = [], []
    for body in mesh.bodies:
        name = body.name if body.name in table else body.name.rsplit("/", 1)[0]
        if name not in table and "rest" not in table:
            faults.append(Fault(path=("time", "start"), what=f'gives no temperature for "{body.name}"'))
        values.append(table.get(name, table.get("rest", 0.0)))
    if faults:
        raise CaseError(faults)
    heat = volumetric_capacity(system.case, mesh, np.array(values))
    return node_shares_of_cells(mesh, heat * np.array(values)[mesh.cell_body]) / node_shares_of_cells(mesh, heat)


def _settled(system: HeatSystem) -> State:
    """Return the steady state at time 0, its coefficients those of its own temperatures.

    With the spaces held the field is settled as that of a steady case; then their balance moves them, by turns.
    """
    refresh = refresher(system)
    if refresh is None:
        return _steady(system)
    y, field = _guessed(system), None
    for _ in range(MOST_REPEATS):
        case = held_at_start(system.case, dict(zip(system.spaces.names, y.tolist(), strict=False)))
        base = conditions(case, system.mesh, system.facet_boundary)
        field = settle(case, system.mesh, system.facet_boundary, base, system.operator, field).temperature
        system = refresh(State(time=0.0, temperature=field, y=y, running=_none_running(system))) or system
        state = _steady(system)
        if np.max(np.abs(state.y - y), initial=0.0) < SETTLED:
            return state
        y = state.y
    raise SolveError("the steady start did not settle: floating spaces and coefficients kept changing each other")


def _guessed(system: HeatSystem) -> np.ndarray:
    held_spaces = held_at_start(system.case).spaces
    rooms = [held_spaces[name].temperature for name in system.spaces.names]
    return np.array([*rooms, *(rooms[s] for s, _ in system.spaces.goods)], dtype=float)


def _steady(system: HeatSystem) -> State:
    """Return the steady state of the conditions at time 0, machines running as much as they must."""
    spaces = system.spaces
    response, outside, behind = _response(system)
    network = response.network
    y = balance(spaces, network.energy(response.fields), behind, outside).y if spaces.n else np.zeros(0)
    terminals = np.where(behind >= 0, y[np.maximum(behind, 0)], outside) if spaces.n else outside
    reference = 0.5 * float(terminals.min() + terminals.max())
    state = np.append(terminals - reference, [1.0] * network.has_load)
    return State(time=0.0, temperature=response.fields @ state + reference, y=y, running=_none_running(system))


def _response(system: HeatSystem) -> tuple[Response, np.ndarray, np.ndarray]:
    """Return unit fields, temperature of every terminal at time 0 (°C) and the floating space behind it (-1: none).

    The sun is among the loads.
    """
    network = system.network
    outside, sun = np.split(system.terminals(0.0), [network.n_terminals])
    if sun.any():
        load = network.load + system.drive[:, network.n_terminals :] @ sun
        network = replace(network, load=load, has_load=True)
    response = respond(network, system.mesh.dim, NODE_TOLERANCE)
    names = system.spaces.names
    rooms = [system.case.boundary[terminal.boundaries[0]].space for terminal in system.given.terminals]
    return response, outside, np.array([names.index(name) if name in names else -1 for name in rooms])


def machine_outlook(system: HeatSystem) -> tuple[str, ...]:
    """Return a sentence for every machine that could never hold its setpoint in the conditions of time 0.

    Parameters
    ----------
    system
        The equations, temperatures in °C; machines that are not fully available then are passed over.
    """
    coolings = [system.spaces.floating(s).cooling for s in range(len(system.spaces.names))]
    if not any(coolings) or any(c is not None and value_at(c.available, 0.0) < 1.0 for c in coolings):
        return ()
    response, outside, behind = _response(system)
    found = balance(system.spaces, response.network.energy(response.fields), behind, outside)
    return machine_remarks(system.spaces, found, " in the conditions of the start")


def save_final(path: Path, system: HeatSystem, state: State) -> None:
    """Write a state by which another run can start: nodes (m), temperatures (°C), spaces and goods by name."""
    np.savez_compressed(
        path,
        points=system.mesh.points,
        temperature=state.temperature,
        names=np.array(system.spaces.labels(), dtype=np.str_),
        y=state.y,
        running=state.running,
        spaces=np.array(system.spaces.names, dtype=np.str_),
    )


def _continued(system: HeatSystem, path: Path) -> State:
    """Return an earlier run's final state, on this mesh taken from the nearest nodes, linear where the meshes agree."""
    mesh = system.mesh
    with np.load(path, allow_pickle=False) as file:
        points, temperature = file["points"], file["temperature"]
        room = dict(zip(file["names"].tolist(), file["y"].tolist(), strict=True))
        stages = dict(zip(file["spaces"].tolist(), file["running"].tolist(), strict=True))
    if points.shape[1] != mesh.dim:
        raise CaseError([Fault(path=("time", "start"), what="the earlier run has another number of dimensions")])
    values = _interpolated(points, temperature, mesh)
    otherwise = _spaces(system, float(values.mean()))
    y = [room.get(label, otherwise[n]) for n, label in enumerate(system.spaces.labels())]
    running = [stages.get(name, 0) for name in system.spaces.names]
    return State(time=0.0, temperature=values, y=np.array(y, dtype=float), running=np.array(running, dtype=np.int64))


def _interpolated(points: np.ndarray, temperature: np.ndarray, mesh: Mesh) -> np.ndarray:
    if points.shape == mesh.points.shape and np.array_equal(points, mesh.points):
        return temperature.copy()
    far, near = cKDTree(points).query(mesh.points, k=mesh.dim + 1)
    if float(far[:, 0].max()) > 0.2 * mesh.size:
        raise CaseError(
            [
                Fault(
                    path=("time", "start"),
                    what="the earlier run is of another geometry: parts of this one lie far from it",
                )
            ]
        )
    weight = 1.0 / np.maximum(far, 1e-9 * mesh.size)
    return (temperature[near] * weight).sum(axis=1) / weight.sum(axis=1)


def held_at_start(case: Case, floating: Mapping[str, float] | None = None) -> Case:
    """Return a steady case at the conditions of time 0, floating spaces (°C, by name) as given or at a guess."""
    middle = 0.5 * sum(outside_range(case))
    spaces = {
        n: guess(case, n, middle) if s.temperature is None else value_at(s.temperature, 0.0)
        for n, s in case.spaces.items()
    }
    surfaces = {n: value_at(b.temperature, 0.0) for n, b in enumerate(case.boundary) if b.temperature is not None}
    return at_moment(held(case, spaces | dict(floating or {}), surfaces), 0.0)
