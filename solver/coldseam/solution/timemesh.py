"""The mesh of a run over time.

The steady refinement for the largest temperature differences of the schedules makes the mesh whose heat flows are
as accurate as asked; it is then made finer near the surfaces that exchange heat, where a change spreads inward by
the diffusion length ``sqrt(alpha tau)`` within the recording interval tau:

    h <= LENGTH sqrt(alpha tau) + GROWTH sqrt(accuracy/1 %) distance

(inside, a field that came from the surface varies over the distance from it, and errors fall as h²), relaxed evenly where
that needs more nodes than the program's limit. The steady proof does not cover how temperatures change over time; a run
with a shorter ``record_every`` or a finer ``size`` shows that.
"""

from __future__ import annotations

import dataclasses
from typing import TYPE_CHECKING

import numpy as np
from scipy.spatial import cKDTree

from coldseam.case.overtime import held, held_radiation, radiant_schedules
from coldseam.case.schedules import span_of
from coldseam.mesh.types import Mesh
from coldseam.solution.adapt import size_field
from coldseam.solution.bounds import cell_sizes
from coldseam.solution.rounds import CALIBRATION, Solution, solve
from coldseam.volumes.capacity import volumetric_capacity

if TYPE_CHECKING:
    from coldseam.case.model import Case

LENGTH, GROWTH = 0.7, 0.25
MOST_NODES = {2: 30_000, 3: 80_000}
RELAX = 1.2


def held_at_extremes(case: Case) -> Case:
    """Return a steady case at the largest temperature differences: spaces alternately at the ends of what they reach.

    Spaces and surfaces, and what they radiate to, are taken at the end of their range that lies farther from the middle
    of all of them; a floating space at its setpoint, or else at its start; the sun at its strongest.
    """
    ranges = {name: _range(case, name) for name in case.spaces}
    surfaces = {n: span_of(b.temperature) for n, b in enumerate(case.boundary) if b.temperature is not None}
    every = [*ranges.values(), *surfaces.values(), *(schedule.span for schedule in radiant_schedules(case))]
    middle = 0.5 * (min(low for low, _ in every) + max(high for _, high in every))

    def far(span: tuple[float, float]) -> float:
        return max(span, key=lambda value: abs(value - middle))

    steady = held(
        case, {name: far(span) for name, span in ranges.items()}, {n: far(span) for n, span in surfaces.items()}
    )
    return held_radiation(steady, lambda schedule: far(schedule.span), lambda schedule: schedule.span[1])


def _range(case: Case, name: str) -> tuple[float, float]:
    space = case.spaces[name]
    if space.temperature is not None:
        return span_of(space.temperature)
    floating = space.floating
    if floating.cooling is not None:
        return span_of(floating.cooling.setpoint)
    start = floating.start
    if start is None:
        start = case.time.start if isinstance(case.time.start, float) else 20.0
    return (start, start)


def mesh_over_time(case: Case, mesher, log) -> tuple[Mesh, Solution, float, tuple[str, ...]]:
    """Return a mesh for a run over time, the steady solution it came from, by how much it was relaxed, and remarks.

    Parameters
    ----------
    case
        With ``[time]``.
    mesher
        From :func:`coldseam.geometry.mesher.open_geometry`.
    log
        Called with a stage and a message.
    """
    steady_case = held_at_extremes(case)
    solution = solve(steady_case, mesher, log)
    sizes, relaxed = sizes_over_time(case, solution)
    base = solution.steady.mesh
    field = size_field(base, sizes)
    cells = int(((cell_sizes(base) / field.size[base.cells].mean(axis=1)) ** base.dim).sum())
    field = dataclasses.replace(field, size=field.size * CALIBRATION[base.dim])
    mesh = mesher.mesh(field, max(cells, 1))
    log("mesh", f"{mesh.n_nodes} nodes, {mesh.n_cells} cells for the run over time")
    remarks = ()
    if relaxed > 1.3:
        remarks = (
            f"near surfaces the mesh is {relaxed:.1f} times coarser than the recording interval of "
            f"{case.time.record:g} s asks for, to stay within the program's limit of nodes: changes faster than some "
            f"{relaxed**2:.0f} intervals are smeared there (max_nodes in [model] raises the limit)",
        )
    return mesh, solution, relaxed, remarks


def sizes_over_time(case: Case, solution: Solution) -> tuple[np.ndarray, float]:
    """Return element sizes (m, per cell of the steady mesh) and by what factor they had to be relaxed."""
    steady = solution.steady
    mesh = steady.mesh
    h = cell_sizes(mesh)
    centres = mesh.points[mesh.cells].mean(axis=1)
    active = (steady.given.terminal >= 0) | (steady.given.flux != 0)
    distance = _distance(mesh, mesh.facets[active], centres)
    diffusivity = steady.given.conductivity / volumetric_capacity(case, mesh, float(steady.temperature.mean()))
    growth = GROWTH * np.sqrt(np.clip(case.model.accuracy / 0.01, 0.1, 2.0))
    wanted = LENGTH * np.sqrt(diffusivity * case.time.record) + growth * distance
    most = case.model.max_nodes or MOST_NODES[mesh.dim]
    per_node = mesh.n_cells / mesh.n_nodes
    factor = 1.0
    while True:
        sizes = np.minimum(h, factor * wanted)
        if float(((h / sizes) ** mesh.dim).sum()) / per_node <= max(most, 1.1 * mesh.n_nodes):
            return sizes, factor
        factor *= RELAX


def _distance(mesh: Mesh, facets: np.ndarray, places: np.ndarray) -> np.ndarray:
    """Return the distance of places (n, dim) from facets, m, measured to their nodes and centres."""
    points = np.vstack([mesh.points[np.unique(facets)], mesh.points[facets].mean(axis=1)])
    near, index = cKDTree(points).query(places)
    # On large facets the nearest sample lies aside: its size is taken off, so that no cell there passes as remote.
    reach = np.linalg.norm(mesh.points[facets] - mesh.points[facets].mean(axis=1, keepdims=True), axis=2).max(axis=1)
    spread = np.concatenate([np.zeros(len(points) - len(facets)), reach])
    return np.maximum(near - spread[index], 0.0)
