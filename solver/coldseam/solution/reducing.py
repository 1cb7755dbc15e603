"""The reduced model of a linear run over time: when it is tried, how its basis is found, and when it is trusted.

What drives the nodes (start, schedules, floating spaces, loads) enters through a few fixed vectors b, so that the field
lies close to a rational Krylov space (Druskin, Knizhnerman, Zaslavsky 2009, SIAM J. Sci. Comput. 31, 3760): the uniform
field (for the heat balance), the start, C^-1 b, and (C + a A)^-1 b, some powers deep, for a ladder of times a from that
in which a disturbance crosses a cell to the run itself. The whole run is then taken in this space, and its error computed from what
it leaves unbalanced (``defect.py``): fields of the full system, which extend the basis where this run needs it. When the
error, with its safety, is a small part of what a step may be off, the basis is accepted as it was checked.
The step's tolerance, ladder and cuts are those of full stepping.

Not tried where coefficients follow the temperatures or bodies melt, on meshes whose steps cost no more than the check,
and where the run has too few steps; given up when the error falls too slowly. Then all nodes are stepped.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from coldseam.case.schedules import Schedule
from coldseam.errors import SolveError
from coldseam.solution.defect import Defect, Ledger, defect, intervals_of, ladder_of
from coldseam.solution.heatsystem import HeatSystem
from coldseam.solution.reduced import ReducedSystem, reduced_state, reduced_system, turned
from coldseam.solution.stage import StageSolver
from coldseam.solution.stepper import State, Stepper
from coldseam.solution.transient import LONGEST, Transient

RATIO = 8.0
"""Of neighbouring times of the ladder."""
DEEP = 3
"""Solves in turn with one factor, for what drives the nodes from the start."""
LEAST_NODES = {2: 10_000, 3: 4_000}
"""Free nodes below which stepping them costs less than stepping and checking several reduced runs."""
MOST_VECTORS = 160
MOST_ROUNDS = 6
SLOW = 0.5  # an error must fall below this part of the one before
ALLOWED, ALLOWED_OF_STEP = 1e-3, 0.1
"""K, and part of the step's tolerance: the smaller is allowed."""
ALLOWED_FLOW = 0.1
"""Part of the case's accuracy that boundaries' flows may be off."""
LOOSE = 1e-8
"""Energy that the solves may miss: any vector will do for a basis, and an error estimate needs two digits."""
AFTER_A_JUMP = 20
"""Steps that a jump costs at least."""
SAME = 1e-8
"""Part of a vector outside the basis below which it adds nothing."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Reduction:
    """What became of a reduced model.

    Parameters
    ----------
    system
        The reduced equations; None where all nodes are to be stepped.
    why
        Why then, in words for the answers; empty where it is used.
    vectors
        Of the last basis that was tried.
    error, flow_error
        Checked error, K, and that of boundaries' flows, of themselves; NaN where nothing was tried.
    allowed
        K.
    solves, factorisations, iterations
        What it cost.
    """

    system: ReducedSystem | None
    why: str
    vectors: int = 0
    error: float = float("nan")
    flow_error: float = float("nan")
    allowed: float = float("nan")
    solves: int = 0
    factorisations: int = 0
    iterations: int = 0

    def facts(self) -> dict[str, object]:
        """Return what the answers say of it, JSON values."""
        if not self.vectors:
            return {"used": False, "why": self.why}
        told = {
            "used": self.system is not None,
            "vectors": self.vectors,
            "checked_error": self.error,
            "checked_flow_error": self.flow_error,
            "allowed_error": self.allowed,
            "full_solves": self.solves,
            "full_factorisations": self.factorisations,
            "full_iterations": self.iterations,
        }
        return told | ({"why": self.why} if self.why else {})

    def told(self, solver: dict[str, object]) -> dict[str, object]:
        """Return the facts of the run's linear solver with those of the reduced model."""
        if self.system is None:
            return solver | {"reduced": self.facts()}
        return solver | {"method": f"reduced model of {self.vectors} unknowns", "reduced": self.facts()}


def not_tried(system: HeatSystem, run: Transient) -> str:
    """Return why no reduced model is tried for a run that has not begun; empty where one is."""
    if run.phase is not None or run.refresh is not None:
        return "the equations are not linear"
    if int(np.count_nonzero(system.free)) < LEAST_NODES[system.mesh.dim]:
        return "a step of so few nodes costs little"
    held = np.asarray(system.readers.fixed_nodes.sum(axis=0)).ravel()
    if np.max(np.abs(held[~system.free] - 1.0), initial=0.0) > 1e-9:
        return "a node of fixed temperature belongs to no boundary"
    steps = max(run.duration / run.longest, LONGEST) + AFTER_A_JUMP * len(_jumps(run))
    cost = _cost(system, run)
    return "" if 3.0 * steps > cost else f"some {steps:.0f} steps cost less than to check one"


def _jumps(run: Transient) -> list[float]:
    known = run.system.terminals
    return [e for e in run.ends if np.any(known(e) != known(e, before=True))]


def _cost(system: HeatSystem, run: Transient) -> float:
    """Return the solves with the full system that two rounds will take at least."""
    lengths = _lengths(system, run)
    return DEEP * len(lengths) * _inputs(system, run.initial).shape[1] + 2 * len(
        intervals_of(system, run.ends, run.duration, lengths)
    )


def _lengths(system: HeatSystem, run: Transient) -> list[float]:
    """Return the ladder from the time in which a disturbance crosses a small cell, or the first step, s."""
    across = np.quantile(system.capacity[system.free] / system.network.matrix.diagonal()[system.free], 0.1)
    return ladder_of(max(float(across), run.longest * 0.5**run.rung), run.duration, RATIO)


def _inputs(system: HeatSystem, initial: State) -> np.ndarray:
    """Return the heats that drive the free nodes, W, (n_free, n): at the start, and of every schedule at 1 K.

    Floating spaces are not among them: their responses come with the factors.
    """
    network, free = system.network, system.free
    terminals = system.terminals(0.0)
    begun = system.node_heat(system.with_fixed(initial.temperature, terminals), initial.y, terminals)
    found = [begun[free]]
    courses = dict.fromkeys(c for c in system.terminal_course if isinstance(c, Schedule))
    for course in courses:
        unit = np.array([float(c == course) for c in system.terminal_course])
        field = system.with_fixed(np.zeros(len(system.capacity)), unit)
        found.append((system.drive @ unit - network.matrix @ field)[free])
    return np.column_stack(found)


def extended(vectors: np.ndarray, capacity: np.ndarray, more: np.ndarray, least: float = 0.0) -> np.ndarray:
    """Return C-orthonormal vectors, (n, m), with what others add to them.

    Parameters
    ----------
    vectors
        C-orthonormal, (n, m).
    capacity
        C, J/K, (n,).
    more
        Vectors to add, (n, k).
    least
        Those whose part outside is nowhere larger (K) are left out.
    """
    kept = np.empty((len(capacity), vectors.shape[1] + more.shape[1]), order="F")
    size = vectors.shape[1]
    kept[:, :size] = vectors
    for x in more.T.copy():
        begun = np.sqrt(x @ (capacity * x))
        for _ in range(2):  # twice is enough (Giraud, Langou, Rozložník 2005, Comput. Math. Appl. 50, 1069)
            x -= kept[:, :size] @ (kept[:, :size].T @ (capacity * x))
        norm = np.sqrt(x @ (capacity * x))
        if norm > SAME * begun and np.max(np.abs(x)) > least:
            kept[:, size] = x / norm
            size += 1
    return kept[:, :size]


def first_vectors(solver: StageSolver, initial: State, lengths: list[float]) -> np.ndarray:
    """Return the basis to begin with, (n_free, m), from the full system's solver and a ladder of times (s)."""
    system = solver.system
    capacity, inputs = solver.capacity, _inputs(system, initial)
    begun = np.column_stack([np.ones(len(capacity)), initial.temperature[system.free]])
    vectors = extended(np.empty((len(capacity), 0)), capacity, begun)
    found = [inputs / capacity[:, None], solver.coupling.toarray() / capacity[:, None]]
    for a in lengths:
        factor = solver.factor(a)
        found.append(factor.response)
        rights = inputs
        for _ in range(DEEP):
            answers = np.column_stack([solver.solve(factor, right, None) for right in rights.T])
            found.append(answers)
            rights = capacity[:, None] * answers
    return extended(vectors, capacity, np.hstack(found))


def reduced_run(
    system: ReducedSystem, whole: Transient, on_field: Callable[[float, np.ndarray], None] | None = None
) -> Transient:
    """Return the run of reduced equations that begins where one over all nodes does, and hands out its fields.

    Parameters
    ----------
    system
        The reduced equations.
    whole
        The run over all nodes, which has not begun.
    on_field
        As for a :class:`coldseam.solution.transient.Transient`, with temperatures of shape (n_nodes,).
    """
    return Transient(system, reduced_state(system, whole.initial), on_field=on_field, weights=whole.gauges.weights)


def run_checked(
    system: ReducedSystem, whole: Transient, stepper: Stepper, lengths: list[float]
) -> tuple[Defect, Transient]:
    """Return the error of a whole reduced run, and the run.

    Parameters
    ----------
    system, whole
        As for :func:`reduced_run`.
    stepper
        Of the full equations.
    lengths
        The ladder that its factors are kept for, s.
    """
    run = reduced_run(system, whole)
    ledger = Ledger(system, intervals_of(system, run.ends, run.duration, lengths))
    while run.status == "running":
        step = run.step()
        ledger.enter(step, run.time)
    return defect(stepper, ledger, whole.initial.temperature - system.expand(run.initial.temperature)), run


def reduction(run: Transient, log: Callable[[str, str], None] | None = None) -> Reduction:
    """Return a reduced model of a run that has not begun, checked against all nodes.

    Parameters
    ----------
    run
        Over all nodes.
    log
        Called with a stage and a message.
    """
    system, initial = run.system, run.initial
    why = not_tried(system, run)
    if why:
        return Reduction(system=None, why=why)
    lengths = _lengths(system, run)
    solver = StageSolver(system, run.tolerance, missing=LOOSE, keep=len(lengths))
    try:
        return _searched(
            run, solver, first_vectors(solver, initial, lengths), lengths, log or (lambda stage, text: None)
        )
    except SolveError as error:  # full stepping may manage, or else says so itself
        return Reduction(system=None, why=f"the reduced run failed: {error}", solves=solver.solves)


def _searched(run: Transient, solver: StageSolver, vectors: np.ndarray, lengths: list[float], log) -> Reduction:
    """Extend the basis by the errors it leaves until they are allowed, or too many, or too slow."""
    system, stepper = run.system, Stepper(run.system, solver)
    allowed, before = min(ALLOWED, ALLOWED_OF_STEP * run.tolerance), np.inf
    allowed_flow = ALLOWED_FLOW * system.case.model.accuracy
    for turn in range(1, MOST_ROUNDS + 1):
        reduced = reduced_system(system, turned(system, vectors))
        found, tried = run_checked(reduced, run, stepper, lengths)
        worst = max(found.largest / allowed, found.flow / allowed_flow)
        log(
            "run",
            f"reduced model of {vectors.shape[1]} unknowns, off by {found.largest:.2g} K ({allowed:.2g} K allowed)",
        )
        why = ""
        if not worst <= 1.0:  # nor where it is not a number
            if turn == MOST_ROUNDS or not worst <= SLOW * before:
                why = f"its error stayed at {found.largest:.2g} K"
            elif vectors.shape[1] >= MOST_VECTORS:
                why = f"{vectors.shape[1]} vectors were not enough"
            elif turn == 1 and 3 * tried.work.steps < solver.solves + 2 * found.errors.shape[1]:
                why = f"{tried.work.steps} steps cost less than to check one"
        if worst <= 1.0 or why:
            return Reduction(
                system=None if why else reduced, why=why, vectors=vectors.shape[1], error=found.largest,
                flow_error=found.flow, allowed=allowed, solves=solver.solves,
                factorisations=solver.factorisations, iterations=solver.iterations,
            )  # fmt: skip
        before = worst
        vectors = extended(vectors, solver.capacity, found.errors, 0.01 * allowed)
    raise AssertionError("the last round returns")
