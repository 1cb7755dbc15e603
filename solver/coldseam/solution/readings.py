"""What a user reads from a solved case - heat flows and couplings - with the interval of each."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from coldseam.mesh.build import signed_measure
from coldseam.mesh.types import Mesh
from coldseam.solution.nonlinear import REASON
from coldseam.solution.steady import Steady

SMALL_FLOW = 0.05
"""A flow below this part of the throughput is held to the accuracy of this part, not of itself."""
SHAPE_SAFETY = 1.5
AVERAGING_SAFETY = 2.0


@dataclass(frozen=True, kw_only=True)
class Interval:
    """A heat flow between bounds, W (2D: W/m).

    Parameters
    ----------
    value
        The mean of the node and the facet network's balance; without bounds the node network's.
    low, high
        Bounds; None where there are none.
    kind
        ``"guaranteed"`` or ``"estimate"``.
    reason
        Why it is only an estimate.
    """

    value: float
    low: float | None
    high: float | None
    kind: str
    reason: str = ""

    @property
    def error(self) -> float:
        """Largest distance of a bound from the value; inf without bounds."""
        if self.low is None or self.high is None:
            return np.inf
        return max(self.high - self.value, self.value - self.low, 0.0)


def boundary_intervals(steady: Steady) -> list[Interval]:
    """Return the interval of every boundary's heat flow, in the case's order."""
    result = []
    of_boundary = {b: n for n, terminal in enumerate(steady.given.terminals) for b in terminal.boundaries}
    for number, value in enumerate(steady.boundary_flow):
        terminal = of_boundary.get(number)
        if terminal is None:  # adiabatic, or a given flux: known
            result.append(Interval(value=value, low=value, high=value, kind="guaranteed"))
            continue
        group = steady.given.terminals[terminal].boundaries
        if len(group) == 1:
            result.append(_interval(steady, [terminal], float(value)))
            continue
        whole = _interval(steady, [terminal], float(steady.boundary_flow[list(group)].sum()))
        split = steady.boundary_flow[list(group)]
        result.append(_part_of(whole, float(value), float(split.sum()), float(np.abs(split).sum())))
    return result


def space_intervals(steady: Steady) -> dict[str, Interval]:
    """Return the interval of every touched space's heat flow into the solid."""
    return {
        name: _interval(steady, terminals, float(steady.boundary_flow[boundaries].sum()))
        for name, (terminals, boundaries) in space_terminals(steady).items()
    }


def space_terminals(steady: Steady) -> dict[str, tuple[list[int], list[int]]]:
    """Return the terminals and boundaries of every space that a boundary faces."""
    found: dict[str, tuple[list[int], list[int]]] = {}
    for number, terminal in enumerate(steady.given.terminals):
        for boundary in terminal.boundaries:
            space = steady.case.boundary[boundary].space
            if space is not None:
                terminals, boundaries = found.setdefault(space, ([], []))
                terminals += [number] * (number not in terminals)
                boundaries.append(boundary)
    return {name: found[name] for name in steady.case.spaces if name in found}


def tolerated(steady: Steady, interval: Interval) -> float:
    """Return the error that the asked accuracy allows this flow, W (2D: W/m)."""
    return steady.case.model.accuracy * max(abs(interval.value), SMALL_FLOW * steady.throughput)


def nodes_of_a_space(steady: Steady) -> dict[str, list[int]]:
    """Return the terminals of each outside point that has a name: spaces, then fixed-temperature boundaries."""
    named = {name: terminals for name, (terminals, _) in space_terminals(steady).items()}
    for number, terminal in enumerate(steady.given.terminals):
        names = [
            steady.case.boundary[b].name
            for b in terminal.boundaries
            if steady.case.boundary[b].space is None and steady.case.boundary[b].cavity is None
        ]
        if names and len(names) == len(terminal.boundaries):
            named[" + ".join(names)] = [number]
    return named


def coupling(steady: Steady) -> dict[str, dict[str, Interval]]:
    """Return the thermal coupling coefficients between named outside points, W/K (2D: W/(m K)).

    ``Q`` from A into the solid is the sum over B of ``L_AB (T_A - T_B)`` when nothing is released inside.
    """
    network = steady.response.network
    form = network.energy(steady.response.fields)
    named = nodes_of_a_space(steady)
    table: dict[str, dict[str, Interval]] = {name: {} for name in named}
    for a, rows in named.items():
        for b, columns in named.items():
            if a == b or set(rows) & set(columns):
                continue
            one, other = _unit(len(form), rows), _unit(len(form), columns)
            value = float(-one @ form @ other)
            table[a][b] = _bounded(steady, -one, other, value, [*rows, *columns])
    return table


def _unit(n: int, entries: list[int]) -> np.ndarray:
    vector = np.zeros(n)
    vector[entries] = 1.0
    return vector


def _interval(steady: Steady, terminals: list[int], value: float) -> Interval:
    reading = _unit(len(steady.state), terminals)
    return _bounded(steady, reading, steady.state, value, list(range(len(steady.given.terminals))))


def _bounded(steady: Steady, reading, state, value: float, involved: list[int]) -> Interval:
    touching = {t for pair in steady.given.clashes for t in pair}
    if touching & set(involved):
        return Interval(value=value, low=None, high=None, kind="estimate", reason=CLASH)
    if steady.bounds is None:
        return Interval(value=value, low=None, high=None, kind="estimate", reason="no bounds were computed")
    value = steady.bounds.estimate(reading, state)
    low, high = steady.bounds.interval(reading, state)
    low, high = min(low, value), max(high, value)
    reason = steady_reason(steady)
    slack = (shape_error(steady) + averaging_error(steady)) * abs(value)
    return Interval(
        value=value, low=low - slack, high=high + slack, kind="estimate" if reason else "guaranteed", reason=reason
    )


CLASH = (
    "surfaces held at different temperatures touch: the true heat flow there has no limit, and this number grows as the "
    "mesh gets finer; give the surfaces films"
)


def steady_reason(steady: Steady) -> str:
    """Return why the intervals of this case are estimates; empty when they are guaranteed."""
    reasons = []
    if shape_error(steady) > 0.0:
        reasons.append("holds for the meshed shape; the effect of facets on curved faces is estimated and added")
    reasons += [] if steady.settled is None else [REASON]
    reasons += [beyond_proof(steady)] if beyond_proof(steady) else []
    return "; ".join(reasons)


def beyond_proof(steady: Steady) -> str:
    """Return what in the case the theory of the bounds does not cover strictly; empty when it covers all."""
    if steady.mesh.axisymmetric and np.any(steady.given.source):
        return "the proof covers heat sources in an axisymmetric section only on average over a cell"
    if steady.mesh.axisymmetric and len(steady.given.sheet_facets):
        return "the proof does not cover sheets in an axisymmetric section strictly"
    return ""


def _part_of(whole: Interval, part: float, total: float, absolute: float) -> Interval:
    """Return the interval of one boundary of a group of touching fixed faces: the nodal split of the group's flow.

    ``part``, ``total`` and ``absolute`` (sum of absolute parts) are the node network's flows.
    """
    if whole.low is None or whole.high is None:
        return Interval(value=part, low=None, high=None, kind="estimate", reason=whole.reason)
    value = part + (whole.value - total) * (abs(part) / absolute if absolute > 0 else 0.0)
    reason = "one of several touching faces of equal fixed temperature; only their sum has a proven interval"
    return Interval(value=value, low=value - whole.error, high=value + whole.error, kind="estimate", reason=reason)


def body_energy(steady: Steady) -> np.ndarray:
    """Return each body's part of ``sum k |grad T|²``, W K, (n_bodies,)."""
    return np.bincount(steady.mesh.cell_body, cell_energy(steady), len(steady.mesh.bodies))


def cell_energy(steady: Steady) -> np.ndarray:
    """Return ``k |grad T|² volume`` of every cell, W K (2D: W K/m), (n_cells,)."""
    from coldseam.volumes.operator import cell_pairs
    from coldseam.volumes.section import cell_radius

    mesh, pairs = steady.mesh, cell_pairs(steady.mesh.dim)
    radius = cell_radius(mesh)
    t = steady.temperature[mesh.cells]
    fall = (t[:, pairs[:, 0]] - t[:, pairs[:, 1]]).T
    k = steady.given.conductivity * (1.0 if radius is None else radius)
    return (k * steady.weights * fall**2).sum(axis=0)


def averaging_error(steady: Steady) -> float:
    """Return the estimated relative effect of one conductivity a cell where it depends on the temperature; else 0.

    How much the heat flow would change, to first order in the conductivities, if the other of two second-order
    averages were taken: k at the cell's mean temperature. Times ``AVERAGING_SAFETY``.
    """
    if steady.settled is None:
        return 0.0
    part = averaging_energy(steady)
    return AVERAGING_SAFETY * abs(float(part.sum())) / max(float(cell_energy(steady).sum()), 1e-300)


def averaging_energy(steady: Steady) -> np.ndarray:
    """Return what the other average of the conductivity adds to each cell's ``k |grad T|²``, W K, (n_cells,)."""
    if steady.settled is None:
        return np.zeros(steady.mesh.n_cells)
    return cell_energy(steady) * steady.settled.averaging / steady.given.conductivity


def shape_error(steady: Steady) -> float:
    """Return the estimated relative effect of facetted curved faces on the heat flows.

    The bodies' missing volume times their share of the energy: a first-order estimate from the
    sensitivity ``d ln Q / d ln k`` of each body.
    """
    deficit = volume_deficit(steady.mesh)
    if not np.any(deficit > 1e-9):
        return 0.0
    energy = body_energy(steady)
    total = max(float(energy.sum()), 1e-300)
    return float(SHAPE_SAFETY * (energy / total) @ np.where(deficit > 1e-9, deficit, 0.0))


def volume_deficit(mesh: Mesh) -> np.ndarray:
    """Return the relative volume error of every meshed body against its exact shape, (n_bodies,)."""
    exact = mesh.quality.get("cad_volume")
    if not exact:
        return np.zeros(len(mesh.bodies))
    present = mesh.quality.get("mesh_volume")  # known since the mesh was made
    if present:
        meshed = np.array([present.get(body.name, np.nan) for body in mesh.bodies])
    else:
        meshed = np.bincount(mesh.cell_body, signed_measure(mesh.points, mesh.cells), len(mesh.bodies))
    known = np.array([exact.get(body.name, np.nan) for body in mesh.bodies])
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.nan_to_num(np.abs(meshed / known - 1.0))
