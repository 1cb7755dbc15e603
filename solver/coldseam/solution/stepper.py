"""TR-BDF2: two implicit stages of one factorisation, second order, L-stable, with an embedded error estimate.

With gamma = 2 - sqrt 2, d = gamma/2, w = sqrt 2/4 (Hosea, Shampine 1996, Appl. Numer. Math. 20, 21) a step of h from
(T, y) takes the heat flows r1 there, r2 at gamma h and r3 at h:

    E2 - E1 = d h (r1 + r2),     E3 - E1 = h (w r1 + w r2 + d r3),     E the heat content

so what is stored is the flows' own quadrature, and flows integrated with the same weights (w, w, d) close the balance
however large the step. The third-order weights ((1 - w)/3, (3 w + 1)/3, d/3) give the error estimate, filtered
through the factor so that stiff modes don't exaggerate it. Inside the step

    E(s) = E1 + h sum_i b_i(s) r_i,     b_i(s) = integral of the Lagrange polynomial of stage i + (b_i - b^_i) s³

conserves heat as well: events are located on it, and a step is cut where a machine switches without being solved again.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from coldseam.solution.heatsystem import HeatSystem
from coldseam.solution.spaces import CHANNELS
from coldseam.solution.stage import Factor, StageSolver

GAMMA = 2.0 - np.sqrt(2.0)
D = GAMMA / 2.0
W = np.sqrt(2.0) / 4.0
WEIGHTS = np.array([W, W, D])
EXTRAPOLATED = 3
"""Steps from which the start of an iterative solution is extrapolated: quadratic."""
FILTERED = 1e-4  # energy that the error estimate may miss: a hundredth of it
MOST_MELTING = 60
MELTING_TOLERANCE = 1e-9  # K
NEAR = 0.05  # of a heat capacity, within which a factor is used again
ERROR_WEIGHTS = WEIGHTS - np.array([(1.0 - W) / 3.0, (3.0 * W + 1.0) / 3.0, D / 3.0])


def weights_at(s: float) -> np.ndarray:
    """Return b_i(s) of the dense output, (3,); at s = 1 the step's own weights.

    >>> bool(np.allclose(weights_at(1.0), WEIGHTS)), float(weights_at(0.4).sum())
    (True, 0.4)
    """
    g, s2, s3 = GAMMA, s * s / 2.0, s**3 / 3.0
    exact = np.array([(s3 - (1.0 + g) * s2 + g * s) / g, (s3 - s2) / (g * (g - 1.0)), (s3 - g * s2) / (1.0 - g)])
    return exact + ERROR_WEIGHTS * s**3


def rates_at(s: float) -> np.ndarray:
    """Return the weights that interpolate the stages' flows at a fraction of the step, (3,)."""
    g = GAMMA
    return np.array([(s - g) * (s - 1.0) / g, s * (s - 1.0) / (g * (g - 1.0)), s * (s - g) / (1.0 - g)])


@dataclass(frozen=True, kw_only=True, eq=False)
class State:
    """Where a run is.

    Parameters
    ----------
    time
        s.
    temperature
        °C, (n_nodes,).
    y
        Spaces, then goods, °C, (n,).
    running
        Stages that run of every machine, (n_spaces,).
    """

    time: float
    temperature: np.ndarray
    y: np.ndarray
    running: np.ndarray


@dataclass(frozen=True, kw_only=True, eq=False)
class Stage:
    """One solved stage.

    Parameters
    ----------
    temperature
        °C, (n_nodes,).
    stored
        Heat stored since the step began, J, (n_nodes,).
    e, d
        Increments of spaces (n,) and of free nodes (n_free,), K.
    factor
        That the stage was solved with.
    """

    temperature: np.ndarray
    stored: np.ndarray
    e: np.ndarray
    d: np.ndarray
    factor: Factor


class NoConvergence(Exception):
    """The iteration on melting nodes did not converge; the step is tried again, shorter."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Step:
    """One accepted or tried step.

    Parameters
    ----------
    start
        Its beginning.
    h
        Its length, s.
    node_heat
        Heat into every node's volume at the three stages, W, (3, n_nodes).
    space_heat
        Into every space and lump of goods, W, (3, n).
    flows
        Heat flows by channel at the stages, W, (3, n_channels); see :func:`channels`.
    temperatures, ys
        Of nodes, (n_nodes,), and of spaces and goods, (n,), at the three stages, °C.
    error
        Estimated error, K.
    """

    start: State
    h: float
    node_heat: np.ndarray
    space_heat: np.ndarray
    flows: np.ndarray
    temperatures: tuple[np.ndarray, np.ndarray, np.ndarray]
    ys: tuple[np.ndarray, np.ndarray, np.ndarray]
    error: float


def channels(system: HeatSystem) -> list[tuple[str, str]]:
    """Return kind and name of every recorded flow: boundaries, what goes into spaces, power and share of machines."""
    found = [("boundary", boundary.name) for boundary in system.case.boundary]
    for name in system.spaces.names:
        found += [(kind, name) for kind in CHANNELS]
        found += [("power", name), ("share", name)]
    return [*found, ("outside", "")]


class Stepper:
    """Takes steps from a state; :meth:`attempt` solves one, :meth:`at` reads inside it.

    Parameters
    ----------
    system
        The equations.
    solver
        Solves its stages.
    phase
        Heat content of nodes that melt (:class:`coldseam.physics.melting.HeatContent`); None where none do.
    """

    def __init__(self, system: HeatSystem, solver: StageSolver, phase=None):
        self.system = system
        self.solver = solver
        self.phase = phase
        self.guesses: dict[int, list[tuple[float, float, np.ndarray]]] = {2: [], 3: []}
        self.kept: tuple[Factor, np.ndarray] | None = None

    def attempt(self, state: State, h: float) -> Step:
        """Solve one step and estimate its error; nothing is kept but the solver's factor.

        Parameters
        ----------
        state
            Where it begins; no schedule has a corner inside the step.
        h
            s.
        """
        a, middle, end = D * h, state.time + GAMMA * h, state.time + h
        capacity = self._space_capacity()
        first = self._evaluate(state, state.temperature, state.y, state.time, before=False)
        two = self._stage(state, a, a * first[0], a * first[1], middle, 2, h)
        r2, s2 = two.stored / a - first[0], two.e * capacity / a - first[1]
        flows2 = self._flows(state, two.temperature, state.y + two.e, middle, before=False)
        known, known_spaces = h * W * (first[0] + r2), h * W * (first[1] + s2)
        three = self._stage(state, a, known, known_spaces, end, 3, h)
        r3, s3 = (three.stored - known) / a, (three.e * capacity - known_spaces) / a
        y3 = state.y + three.e
        flows3 = self._flows(state, three.temperature, y3, end, before=True)
        node_heat, space_heat = np.stack([first[0], r2, r3]), np.stack([first[1], s2, s3])
        x, e = self.filtered(
            state, three.factor, h * (ERROR_WEIGHTS @ node_heat), h * (ERROR_WEIGHTS @ space_heat), y3, end
        )
        if three.factor.solver.iterative:
            self._remember(two.d, three.d, state.time, h)
        return Step(
            start=state,
            h=h,
            node_heat=node_heat,
            space_heat=space_heat,
            flows=np.stack([first[2], flows2, flows3]),
            temperatures=(state.temperature, two.temperature, three.temperature),
            ys=(state.y, state.y + two.e, y3),
            error=float(max(self.system.largest(x), np.max(np.abs(e), initial=0.0))),
        )

    def at(self, step: Step, s: float) -> State:
        """Return the state at a fraction of a step, 0 to 1."""
        weights = step.h * weights_at(s)
        start, time = step.start, step.start.time + s * step.h
        stored = weights @ step.node_heat
        if self.phase is None:
            temperature = start.temperature + stored / self.system.capacity
        else:
            temperature = self.phase.temperature(self.phase.heat(start.temperature) + stored, start.temperature)
        temperature = self.system.with_fixed(temperature, self.system.terminals(time, before=True))
        y = self.y_at(step, s) if self.system.spaces.n else start.y
        return State(time=time, temperature=temperature, y=y, running=start.running)

    def y_at(self, step: Step, s: float) -> np.ndarray:
        """Return only the temperatures of spaces and goods at a fraction of a step, °C, (n,)."""
        return step.start.y + step.h * (weights_at(s) @ step.space_heat) / self._space_capacity()

    def _space_capacity(self) -> np.ndarray:
        return self.system.spaces.capacity

    def _evaluate(self, state: State, temperature, y, time: float, *, before: bool):
        """Return the heats into nodes and spaces (W), and the flows by channel."""
        system = self.system
        terminals = system.terminals(time, before=before)
        temperature = system.with_fixed(temperature, terminals)
        node_heat = system.node_heat(temperature, y, terminals)
        own, _ = system.spaces.flows(y, state.running, time, before=before)
        space_heat = system.space_heat(temperature, y, own, time, before=before)
        return (
            np.where(system.free, node_heat, 0.0),
            space_heat,
            self._channel_row(state, temperature, y, terminals, node_heat, own, time, before),
        )

    def _flows(self, state: State, temperature, y, time: float, *, before: bool) -> np.ndarray:
        return self._evaluate(state, temperature, y, time, before=before)[2]

    def _channel_row(self, state, temperature, y, terminals, node_heat, own, time, before) -> np.ndarray:
        spaces = self.system.spaces
        row = [*self.system.boundary_flows(temperature, y, terminals, node_heat)]
        for s in range(len(spaces.names)):
            power = share = 0.0
            if spaces.machines[s] is not None:
                share = spaces.machine_heat(s, y, state.running, time, before=before)[2]
                power = spaces.machines[s].power(float(y[s]), spaces.ambient(s, y, time, before=before), share)
            row += [*own[s], power, share]
        return np.array([*row, spaces.outside_heat(own, y, time, before=before)])

    def _stage(self, state: State, a: float, known_nodes, known_spaces, time: float, number: int, h: float) -> Stage:
        """Solve one stage: linear at once, with melting nodes by iteration on their heat content."""
        terminals, before = self.system.terminals(time, before=number == 3), number == 3
        moved = self.system.with_fixed(state.temperature, terminals)
        if self.phase is not None:
            return self._melting(state, a, moved, known_nodes, known_spaces, terminals, time, before)
        factor, free = self.solver.factor(a), self.solver.free
        guess = self._guess(number, state.time, h) if factor.solver.iterative else None
        d, e = self._linear(factor, state, moved, known_nodes[free], known_spaces, terminals, time, before, guess)
        stored = np.zeros(len(moved))
        stored[free] = self.solver.capacity * d
        moved[free] += d
        return Stage(temperature=moved, stored=stored, e=e, d=d, factor=factor)

    def _melting(
        self, state: State, a: float, moved, known_nodes, known_spaces, terminals, time: float, before
    ) -> Stage:
        """Iterate e <- e + (de/dT) d, T <- T(e) (Swaminathan, Voller 1992, Metall. Trans. B 23, 651).

        For melting, and for specific heats over temperature.

        The heat content, not the temperature, is carried on, so that no step can jump over latent heat.
        """
        free, phase, solver = self.solver.free, self.phase, self.solver
        begun = phase.heat(state.temperature)
        content = begun.copy()
        for _ in range(MOST_MELTING):
            factor, slope = self._with_slope(solver, a, phase.slope(moved)[free])
            right = known_nodes[free] - (content - begun)[free]
            d, e = self._linear(factor, state, moved, right, known_spaces, terminals, time, before, None)
            content[free] += slope * d
            wanted = moved.copy()
            wanted[free] += d
            moved = self.system.with_fixed(phase.temperature(content, wanted), terminals)
            if np.max(np.abs(moved - wanted)) <= MELTING_TOLERANCE:
                stored = np.zeros(len(moved))
                stored[free] = (content - begun)[free]
                return Stage(
                    temperature=moved, stored=stored, e=e, d=moved[free] - state.temperature[free], factor=factor
                )
        raise NoConvergence

    def _with_slope(self, solver: StageSolver, a: float, slope: np.ndarray) -> tuple[Factor, np.ndarray]:
        """Return a factor and the slopes (J/K, (n_free,)) it was made with: the last one, where they are still near.

        The iteration comes to the same contents whatever slopes it goes by, with near ones nearly as fast.
        """
        if self.kept is None or self.kept[0].a != a or np.any(np.abs(slope - self.kept[1]) > NEAR * self.kept[1]):
            self.kept = solver.made(a, slope), slope
        return self.kept

    def _linear(self, factor: Factor, state: State, moved, right, known_spaces, terminals, time: float, before, guess):
        """Return increments of the free nodes from ``moved``, and of spaces from the state, for a linear stage."""
        system, solver, a = self.system, self.solver, factor.a
        heat = system.node_heat(moved, state.y, terminals)
        x = solver.solve(factor, right + a * heat[solver.free], guess)
        if not system.spaces.n:
            return x, np.zeros(0)
        reached = moved.copy()
        reached[solver.free] += x

        def own_heat(e: np.ndarray):
            y = state.y + e
            flows, slope = system.spaces.flows(y, state.running, time, before=before)
            return system.spaces.heat(flows, y, time, before=before), slope

        films = system.gather @ reached - system.films * state.y
        e = solver.newton(factor, known_spaces + a * films, own_heat, np.zeros(system.spaces.n))
        return x + a * (factor.response @ e), e

    def filtered(
        self, state: State, factor: Factor, nodes: np.ndarray, spaces: np.ndarray, y: np.ndarray, time: float
    ) -> tuple[np.ndarray, np.ndarray]:
        """Return what heats (J) given to nodes, (n_nodes,), and spaces, (n,), move in one implicit step.

        Parameters
        ----------
        state, y, time
            Which machines run; temperatures of spaces and goods (°C, (n,)) and the time (s) to linearise at.
        factor
            Of the step.
        nodes, spaces
            The heats.

        Returns
        -------
        tuple
            Changes of the free nodes' temperatures, (n_free,), and of those of spaces and goods, (n,), K.
        """
        solver, a = self.solver, factor.a
        x = solver.solve(factor, nodes[solver.free], None, FILTERED)
        if not self.system.spaces.n:
            return x, np.zeros(0)
        _, slope = self.system.spaces.flows(y, state.running, time, before=True)
        matrix = np.diag(self._space_capacity() + a * self.system.films) - a * a * factor.schur - a * slope
        e = np.linalg.solve(matrix, spaces + a * (solver.gather @ x))
        return x + a * (factor.response @ e), e

    def _guess(self, number: int, time: float, h: float) -> np.ndarray | None:
        """Extrapolate a stage's increment per second from those of up to three steps before; None at first."""
        past = self.guesses[number]
        if not past:
            return None
        middles = np.array([start + 0.5 * length for start, length, _ in past])
        weights = lagrange(middles, time + 0.5 * h)
        guess = (weights[0] * h / past[0][1]) * past[0][2]
        for weight, (_, length, d) in zip(weights[1:], past[1:], strict=True):
            guess += (weight * h / length) * d
        return guess

    def _remember(self, d2: np.ndarray, d3: np.ndarray, time: float, h: float) -> None:
        for number, d in ((2, d2), (3, d3)):
            past = [entry for entry in self.guesses[number] if entry[0] < time]
            self.guesses[number] = [*past[1 - EXTRAPOLATED :], (time, h, d)]


def lagrange(places: np.ndarray, place: float) -> np.ndarray:
    """Return the weights, (n,), by which values at places, (n,), are interpolated or extrapolated to another.

    >>> lagrange(np.array([0.0, 1.0]), 2.0).tolist()
    [-1.0, 2.0]
    """
    apart = places[:, None] - places[None, :] + np.eye(len(places))
    away = np.broadcast_to(place - places, apart.shape)
    return np.prod(np.where(np.eye(len(places), dtype=bool), 1.0, away / apart), axis=1)
