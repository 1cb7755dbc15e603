"""Mesh, solve, prove, refine - until every heat flow is as accurate as was asked.

Each round solves the node and the facet network on one mesh. While an interval is too wide, the
cells' parts of the gap set the sizes of the next mesh. Single temperatures (probes, the extremes of
each surface) have no proof; they count as settled when a finer mesh moves them by less than
:func:`point_limit` of the temperatures' range (at most the 0.005 of ISO 10211), and refinement goes there too.
"""

from __future__ import annotations

import dataclasses
import time
from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from coldseam.errors import CaseError, Fault
from coldseam.mesh.locate import locate
from coldseam.mesh.types import Mesh, SizeField
from coldseam.solution.adapt import refine_near, size_field, wanted_sizes
from coldseam.solution.bounds import cell_sizes, check_gap, local_gap, prove
from coldseam.solution.memory import require_room, room_for
from coldseam.solution.readings import (
    Interval,
    averaging_energy,
    averaging_error,
    beyond_proof,
    boundary_intervals,
    cell_energy,
    shape_error,
    space_intervals,
    space_terminals,
    steady_reason,
    tolerated,
)
from coldseam.solution.steady import Steady, solve_on

if TYPE_CHECKING:
    from coldseam.case.model import Case

MOST_ROUNDS = 10
POINT_LIMIT = 0.005
"""ISO 10211: largest change of a temperature factor on a finer mesh."""
LARGEST_STEP = 12.0  # the gap is reduced by at most this factor in one round
MARGIN = {2: 1.3, 3: 1.6}  # on the asked reduction: a round more costs most in 3D
SMALLEST_STEP = 1.6  # and at least by this one
POINT_STEPS = (0.25, 0.5)  # change of size at a point that moved: the more it moved the smaller
PEAKS = (24, 6, 2)  # peaks of a surface that get finer elements: fewer where that would take
MOST_GROWTH = 2.0  # times the cells that there are, or that the heat flows ask for
MOST_READINGS = 4  # unit states whose gap is looked at in one round, the worst first
MOST_NODES = {2: 400_000, 3: 300_000}
CALIBRATION = {2: 0.9, 3: 0.78}
"""Size to ask of the mesher for a wanted mean edge; corrected by what each round's mesh turned out to need."""
PROOF_TOLERANCE = 1e-5  # of the accuracy: keeps what the proof's own iteration leaves open far below it
NOTHING = 1e-9  # of the conductance to the outside: a coupling below this is rounding
EXACT = 1e-6  # a relative gap below this: the field is linear, a finer mesh changes nothing


@dataclass(frozen=True, kw_only=True)
class Round:
    """What one round reached.

    Parameters
    ----------
    nodes, cells
        Size of the mesh.
    error
        Worst error of a heat flow over what it is allowed; the asked accuracy is met at 1. None without proof.
    moved
        Largest move of a watched temperature since the round before, over the temperatures' range.
    seconds
        Meshing included.
    """

    nodes: int
    cells: int
    error: float | None
    moved: float | None
    seconds: float


@dataclass(frozen=True, kw_only=True, eq=False)
class _Restless:
    """Places, m, (n, dim), where a watched temperature is unsettled, and the change of size wanted there."""

    points: np.ndarray
    step: float


@dataclass(frozen=True, kw_only=True, eq=False)
class Solution:
    """A solved case: the last round's field and how the rounds went.

    Parameters
    ----------
    steady
        The field, its flows and their bounds.
    rounds
        All rounds.
    flows_met, points_met
        Whether the heat flows and the watched temperatures are as accurate as asked.
    remarks
        Why the rounds ended early, if they did.
    """

    steady: Steady
    rounds: tuple[Round, ...]
    flows_met: bool
    points_met: bool
    remarks: tuple[str, ...] = ()


def solve(case: Case, mesher, log: Callable[[str, str], None]) -> Solution:
    """Solve a case to its asked accuracy.

    Parameters
    ----------
    case
        The case.
    mesher
        From :func:`coldseam.geometry.mesher.open_geometry`.
    log
        Called with a stage and a message.

    Raises
    ------
    ColdseamError
        From the geometry, the mesh, the boundaries or the solver.
    """
    require_room(case, mesher)
    size, target, segments, calibration = None, None, None, CALIBRATION[case.model.dimensions]
    rounds: list[Round] = []
    steady: Steady | None = None
    watched: dict[tuple, tuple[np.ndarray, float]] | None = None
    while True:
        start = time.perf_counter()
        options = {"curve_segments": segments} if segments and mesher.remeshable else {}
        mesh = mesher.mesh(size, target, **options)
        log("solve", f"{mesh.n_nodes} nodes, {mesh.n_cells} cells")
        steady = _proven(case, mesh, steady, log)
        flows = _flows(steady)
        error = _worst(steady, flows)
        before, watched = watched, watched_points(steady)
        moved, restless = _moves(steady, before, watched)
        relative = _relative_gap(steady)
        rounds.append(
            Round(nodes=mesh.n_nodes, cells=mesh.n_cells, error=error, moved=moved, seconds=time.perf_counter() - start)
        )
        log("solve", _round_text(len(rounds), rounds[-1]))
        flows_met = error is None or error <= 1.0
        exact = relative is not None and abs(relative) < EXACT and not steady_reason(steady)
        points_met = exact or not watched or (moved is not None and moved <= point_limit(case))
        if flows_met and points_met:
            return Solution(steady=steady, rounds=tuple(rounds), flows_met=flows_met, points_met=points_met)
        stop = _spent(case, mesh)  # before sizes are looked for, which takes a while on a large mesh
        if stop:
            return Solution(
                steady=steady, rounds=tuple(rounds), flows_met=flows_met, points_met=points_met, remarks=(stop,)
            )
        segments = _next_segments(steady, segments)
        calibration *= float(mesh.quality.get("scale", 1.0))
        sizes = _next_sizes(steady, flows, error)
        size, target = _plan_near(steady.mesh, sizes, restless)
        stop = _reason_to_stop(case, mesh, rounds, target)
        if stop and restless and not flows_met:  # where both don't fit the heat flows come first
            size, target = _plan(steady.mesh, sizes)
            stop = _reason_to_stop(case, mesh, rounds, target)
        if stop:
            return Solution(
                steady=steady, rounds=tuple(rounds), flows_met=flows_met, points_met=points_met, remarks=(stop,)
            )
        size = dataclasses.replace(size, size=size.size * calibration)


def _plan(mesh: Mesh, sizes: np.ndarray) -> tuple[SizeField, int]:
    """Return the size field of cell sizes, m, (n_cells,), and about how many cells it makes."""
    size = size_field(mesh, sizes)
    growth = (cell_sizes(mesh) / size.size[mesh.cells].mean(axis=1)) ** mesh.dim
    return size, max(int(growth.sum()), 1)


def _plan_near(mesh: Mesh, sizes: np.ndarray, restless: list[_Restless]) -> tuple[SizeField, int]:
    """Return :func:`_plan` with finer elements at unsettled points: at so many peaks of a surface as fit in some cells.

    A surface of all but one temperature (a sphere's) has peaks everywhere, and no need of them all.
    """
    size, target = _plan(mesh, sizes)
    if not restless:
        return size, target
    room = MOST_GROWTH * max(target, mesh.n_cells)
    for most in PEAKS:
        finer = sizes
        for points in restless:
            finer = refine_near(mesh, finer, points.points[:most], points.step)
        size, target = _plan(mesh, finer)
        if target <= room:
            break
    return size, target


def _proven(case: Case, mesh: Mesh, before: Steady | None, log) -> Steady:
    steady = solve_on(case, mesh, before)
    if steady.settled is not None:
        log("solve", f"coefficients settled after {steady.settled.iterations} steps")
    if steady.given.clashes:
        return steady
    log("solve", "proving the heat flows")
    tolerance = PROOF_TOLERANCE * case.model.accuracy
    bounds = prove(steady.mesh, steady.given, steady.weights, steady.response, tolerance)
    return dataclasses.replace(steady, bounds=bounds)


def _flows(steady: Steady) -> list[tuple[Interval, np.ndarray]]:
    """Return every heat flow that must be accurate, with the vector that reads it from Lambda."""
    readings = []
    intervals = boundary_intervals(steady)
    for number, terminal in enumerate(steady.given.terminals):
        if len(terminal.boundaries) == 1:
            readings.append((intervals[terminal.boundaries[0]], [number]))
    for name, interval in space_intervals(steady).items():
        terminals = space_terminals(steady)[name][0]
        if len(terminals) > 1 or len(steady.given.terminals[terminals[0]].boundaries) > 1:
            readings.append((interval, terminals))
    result = []
    for interval, terminals in readings:
        vector = np.zeros(len(steady.state))
        vector[terminals] = 1.0
        result.append((interval, vector))
    return result


def _worst(steady: Steady, flows) -> float | None:
    """Return the largest error over its allowance; None where nothing is proven, 0 where nothing flows."""
    if steady.bounds is None:
        return None
    floor = 1e-9 * float(np.abs(steady.state).max() ** 2 * np.abs(steady.bounds.high).max())
    if steady.throughput * max(float(np.abs(steady.state).max()), 1e-300) <= floor:
        return 0.0
    return max((interval.error / tolerated(steady, interval) for interval, _ in flows), default=0.0)


def _relative_gap(steady: Steady) -> float | None:
    if steady.bounds is None:
        return None
    high = abs(float(steady.state @ steady.bounds.high @ steady.state))
    gap = float(steady.state @ (steady.bounds.high - steady.bounds.low) @ steady.state)
    return gap / high if high > 0 else 0.0


def watched_points(steady: Steady) -> dict[tuple, tuple[np.ndarray, float]]:
    """Return place (m) and temperature (°C) of every probe and of each facing surface's extremes.

    Raises
    ------
    CaseError
        A probe lies outside the model.
    """
    watched: dict[tuple, tuple[np.ndarray, float]] = {}
    if steady.case.probe:
        at = np.array([probe.at for probe in steady.case.probe], dtype=float)
        cells, weights = locate(steady.mesh, at)
        outside = [
            Fault(path=("probe", int(n), "at"), what=f'the probe "{steady.case.probe[n].name}" lies outside the model')
            for n in np.flatnonzero(cells < 0)
        ]
        if outside:
            raise CaseError(outside)
        values = (steady.read_temperature[steady.mesh.cells[cells]] * weights).sum(axis=1)
        for probe, place, value in zip(steady.case.probe, at, values, strict=True):
            watched["probe", probe.name] = (place, float(value))
    for number, boundary in enumerate(steady.case.boundary):
        if boundary.space is None:
            continue
        nodes = np.unique(steady.mesh.facets[steady.facet_boundary == number])
        values = steady.read_temperature[nodes]
        for kind, pick in (("min", np.argmin(values)), ("max", np.argmax(values))):
            watched["boundary", boundary.name, kind] = (steady.mesh.points[nodes[pick]], float(values[pick]))
    return watched


def point_limit(case: Case) -> float:
    """Return how far a watched temperature may move between the last meshes, over the temperatures' range."""
    return min(POINT_LIMIT, 0.5 * case.model.accuracy)


def temperature_range(steady: Steady) -> float:
    """Return the spread of the field's and the outside's temperatures, K."""
    outside = steady.state[: len(steady.given.terminals)] + steady.reference
    low = min(float(outside.min()), float(steady.read_temperature.min()))
    return max(float(outside.max()), float(steady.read_temperature.max())) - low


def _moves(steady: Steady, before, watched) -> tuple[float | None, list[_Restless]]:
    """Return the largest relative move, and the points that moved too much."""
    span = temperature_range(steady)
    if span <= 0.0:
        return 0.0, []
    if before is None:  # another mesh must show whether they move, so let it be finer at each of them
        return None, [_Restless(points=place[None], step=POINT_STEPS[1]) for place, _ in watched.values()]
    moves = {key: abs(value - before[key][1]) / span for key, (_, value) in watched.items() if key in before}
    limit = point_limit(steady.case)
    restless = [
        _Restless(
            points=_candidates(steady, key, watched[key], move * span), step=float(np.clip(limit / move, *POINT_STEPS))
        )
        for key, move in moves.items()
        if move > limit
    ]
    return max(moves.values(), default=0.0), restless


def _candidates(steady: Steady, key: tuple, point: tuple[np.ndarray, float], move: float) -> np.ndarray:
    """Return the places, m, (n, dim), at which an unsettled extreme may turn up: a surface's peaks as high, but for the move."""
    place, value = point
    if key[0] == "probe":
        return place[None]
    number = [boundary.name for boundary in steady.case.boundary].index(key[1])
    facets = steady.mesh.facets[steady.facet_boundary == number]
    height = steady.read_temperature if key[2] == "max" else -steady.read_temperature
    around = np.full(steady.mesh.n_nodes, -np.inf)
    np.maximum.at(around, facets.ravel(), np.repeat(height[facets].max(axis=1), facets.shape[1]))
    peaks = np.unique(facets)
    peaks = peaks[height[peaks] >= around[peaks]]
    near = peaks[np.abs(steady.read_temperature[peaks] - value) <= move]
    return steady.mesh.points[near[np.argsort(-height[near])][: PEAKS[0]]]


def _next_sizes(steady: Steady, flows, error: float | None) -> np.ndarray:
    """Return element sizes (m, per cell) for the next mesh by the heat flows."""
    mesh = steady.mesh
    if steady.bounds is None:
        return 0.5 * cell_sizes(mesh)
    gap = _gap_indicator(steady, flows)
    # Where only temperatures are unsettled, the mesh gets finer there and stays as it is elsewhere.
    late = error is not None and error > 1.0
    factor = np.clip(MARGIN[mesh.dim] * (error or 0.0), SMALLEST_STEP if late else 1.0, LARGEST_STEP)
    return wanted_sizes(mesh, gap, float(gap.sum()) / factor)[0]


def _gap_indicator(steady: Steady, flows) -> np.ndarray:
    """Return the cells' gap, the state's and the worst readings' together, each normalised to 1."""
    states = [steady.state]
    ranked = sorted(flows, key=lambda flow: -flow[0].error / tolerated(steady, flow[0]))
    late = [vector for interval, vector in ranked if interval.error > tolerated(steady, interval)]
    if len(steady.given.terminals) > 2 or steady.response.network.has_load:
        # Where one space is all there is outside, its reading is a uniform field: nothing flows, there is no gap to spread.
        least = NOTHING * float(steady.response.network.exchange.sum(axis=0).max())
        states += [reading for reading in late if reading @ steady.bounds.high @ reading > least][:MOST_READINGS]
    total = np.zeros(steady.mesh.n_cells)
    averaging = np.abs(averaging_energy(steady))  # in the cells' proportions, of the size of its estimate
    averaging *= averaging_error(steady) * float(cell_energy(steady).sum()) / max(float(averaging.sum()), 1e-300)
    for state in states:
        gap = np.maximum(_checked_gap(steady, state), 0.0) + (averaging if state is steady.state else 0.0)
        total += gap / max(float(gap.sum()), 1e-300)
    return total


def _checked_gap(steady: Steady, state: np.ndarray) -> np.ndarray:
    gap = local_gap(steady.mesh, steady.given, steady.weights, steady.response, steady.bounds, state)
    if not beyond_proof(steady):
        check_gap(gap, steady.bounds, state)
    return gap


def _next_segments(steady: Steady, segments: int | None) -> int | None:
    """Return more segments per circle while the facets' effect takes a large part of the accuracy."""
    effect = shape_error(steady)
    if effect <= 0.25 * steady.case.model.accuracy:
        return segments
    present = int(steady.mesh.quality.get("curve_segments", 24))
    return int(np.ceil(present * min(2.0, np.sqrt(effect / (0.2 * steady.case.model.accuracy)))))


def _spent(case: Case, mesh: Mesh) -> str:
    """Return why no finer mesh is even looked for; empty where the present one has nodes to spare."""
    most = case.model.max_nodes or MOST_NODES[mesh.dim]
    if mesh.n_nodes <= most:
        return ""
    limit = "max_nodes" if case.model.max_nodes else "the program's limit"
    return f"a finer mesh than this of {mesh.n_nodes:,} nodes is beyond {limit} of {most:,}".replace(",", " ")


def _reason_to_stop(case: Case, mesh: Mesh, rounds: list[Round], target: int) -> str:
    per_node = mesh.n_cells / mesh.n_nodes
    most = case.model.max_nodes or MOST_NODES[mesh.dim]
    if len(rounds) >= MOST_ROUNDS:
        return f"stopped after {MOST_ROUNDS} rounds of refinement"
    if target / per_node > most:
        limit = "max_nodes" if case.model.max_nodes else "the program's limit"
        return f"a finer mesh would need some {target / per_node:,.0f} nodes, more than {limit} of {most:,}".replace(
            ",", " "
        )
    if not room_for(target, mesh.dim):
        return f"a finer mesh of some {target:,} cells would not fit in this computer's free memory".replace(",", " ")
    return ""


def _round_text(number: int, entry: Round) -> str:
    error = "no proof" if entry.error is None else f"error {entry.error:.2f} of what is allowed"
    moved = "" if entry.moved is None else f", temperatures moved {entry.moved:.4f} of their range"
    return f"round {number}: {entry.nodes} nodes, {entry.cells} cells, {error}{moved}, {entry.seconds:.1f} s"
