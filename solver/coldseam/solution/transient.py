"""A run over time: steps from a tolerance in kelvin, cut where machines switch, ended where schedules bend.

:meth:`Transient.step` owns the bookkeeping; :class:`coldseam.solution.stepper.Stepper` fills in the step. Step sizes
lie on a ladder of halves of the longest step, so that factors are used again; what is left before a bend is
divided into equal steps of at most the present size. After a jump the step starts small and grows.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, replace

import numpy as np

from coldseam.errors import SolveError
from coldseam.physics.melting import HeatContent
from coldseam.solution.causes import Causes
from coldseam.solution.coefficients import Coefficients
from coldseam.solution.events import Happened, Watch, first_crossing
from coldseam.solution.heatsystem import HeatSystem
from coldseam.solution.record import Column, Gauges, Weights, flows_at
from coldseam.solution.refresh import Refresher
from coldseam.solution.rows import Extremes, Rows
from coldseam.solution.spaces import outside_range
from coldseam.solution.stage import StageSolver
from coldseam.solution.stepper import NoConvergence, State, Step, Stepper, channels, rates_at, weights_at

TOLERANCE = 0.1
"""Error allowed to a step over accuracy times the temperatures' range, where the case does not say."""
BALANCE_LIMIT = 1e-6
"""Heat in less heat stored over what passed through; stages balance to rounding, so that real runs stay far below."""
LONGEST = 50.0  # the run over its longest step, at least
SMALLEST = 1e-12  # of the run
PATIENCE = 3  # steps after a rejected one before the step may grow again
GROW = (1.0 / 12.0, 1.0 / 700.0)
"""Errors over the tolerance below which the step grows by one and by two rungs (2³ = 8, 4³ = 64, with a margin)."""


def tolerance_of(system: HeatSystem) -> float:
    """Return the error that one step may have, K."""
    time = system.case.time
    if time.tolerance is not None:
        return time.tolerance
    low, high = outside_range(system.case)
    return TOLERANCE * system.case.model.accuracy * max(high - low, 1.0)


@dataclass
class Totals:
    """Integrals over the run so far.

    Parameters
    ----------
    heat
        Of every channel, J (power and share: J and s), (n_channels,).
    magnitude
        Of the channels' absolute values.
    peak
        Largest absolute value of every channel, W.
    """

    heat: np.ndarray
    magnitude: np.ndarray
    peak: np.ndarray


@dataclass
class Work:
    """What a run cost: steps taken, tried again, and cut by a machine's switch."""

    steps: int = 0
    rejected: int = 0
    switched: int = 0


@dataclass(frozen=True, kw_only=True, eq=False)
class History:
    """A finished run over time.

    Parameters
    ----------
    system
        The equations.
    columns, rows
        What was recorded; rows of (n_rows, n_columns).
    extremes
        Of every limit's quantity over all steps: least value, when, largest value, when (s), (n_limits, 4).
    events
        What became of the events.
    totals
        Integrals by channel.
    initial, final
        The states at both ends.
    temperature
        Node temperatures at the end as they are read: within the range of their causes, °C, (n_nodes,).
    heat_in, heat_stored, throughput
        J: what came in, what is stored, and what passed through.
    tolerance
        Error allowed to a step, K.
    work
        Counts.
    phase
        Heat content where bodies melt, or None.
    solver
        Method and counts of the linear solver.
    reached
        Lowest and highest temperature of every node, °C, (2, n_nodes).
    coefficients
        Films, air gaps and conductivities at the end; None where none depend on the temperatures.
    strayed
        Warnings of boundaries whose films left their correlations' ranges.
    """

    system: HeatSystem
    columns: tuple[Column, ...]
    rows: np.ndarray
    extremes: np.ndarray
    events: tuple[Happened, ...]
    totals: Totals
    initial: State
    final: State
    temperature: np.ndarray
    heat_in: float
    heat_stored: float
    throughput: float
    tolerance: float
    work: Work
    reached: np.ndarray
    phase: HeatContent | None = None
    solver: dict[str, object] = field(default_factory=dict)
    coefficients: Coefficients | None = None
    strayed: tuple[str, ...] = ()

    @property
    def relative_closure(self) -> float:
        """Heat in less heat stored over what passed through; 0 where nothing did."""
        return abs(self.heat_in - self.heat_stored) / self.throughput if self.throughput > 0.0 else 0.0

    def column(self, kind: str, name: str = "") -> np.ndarray:
        """Return one recorded column, (n_rows,)."""
        position = next(n for n, c in enumerate(self.columns) if (c.kind, c.name) == (kind, name))
        return self.rows[:, position]


class Transient:
    """A run over time that can be stepped.

    Parameters
    ----------
    system
        The equations.
    initial
        State at the beginning.
    phase
        Heat content where bodies melt.
    refresh
        Called with state and length of every step to be tried; returns a new system when coefficients have changed,
        else None.
    on_field
        Called with time (s) and node temperatures (°C) at every time after 0 that a field is asked for.
    weights
        What reads its mesh, where another run on it has them already.
    """

    def __init__(
        self,
        system: HeatSystem,
        initial: State,
        *,
        phase=None,
        refresh: Refresher | None = None,
        on_field: Callable[[float, np.ndarray], None] | None = None,
        weights: Weights | None = None,
    ):
        self.system, self.phase, self.refresh, self.on_field = system, phase, refresh, on_field
        self.tolerance = tolerance_of(system)
        self.solver = StageSolver(system, self.tolerance)
        self.stepper = Stepper(system, self.solver, phase)
        self.causes = Causes(system, initial)
        self.gauges = Gauges(system, self.causes, phase, weights)
        time = system.case.time
        self.duration = time.duration
        self.totals = Totals(*(np.zeros(len(channels(system))) for _ in range(3)))
        self.initial = initial
        self.state = self._settled(initial)
        self.reached = np.stack([self._read(self.state)] * 2)
        self.ends = [*system.corners(0.0, self.duration), self.duration]
        self.longest = min(time.longest_step or np.inf, self.duration / LONGEST)
        self.rung = self._first_rung()
        self.work = Work()
        self.patience = 0
        self.status = "running"
        self.rows = Rows(len(self.gauges.columns()))
        self.extremes = Extremes(self.gauges.limited())
        self.recorded = 0
        self.fields = field_times(time)
        self.watches = [
            Watch(e.name, e.when.level, e.when.direction, self.gauges.reading(e.when)) for e in system.case.event
        ]
        self.stops = [e.stop for e in system.case.event]
        for watch in self.watches:
            watch.begin(self.state)

    @property
    def time(self) -> float:
        """Simulated time, s."""
        return self.state.time

    def step(self) -> Step:
        """Take one step that meets the tolerance and do all bookkeeping.

        Raises
        ------
        SolveError
            The step became too small, or a solver failed.
        """
        if self.status != "running":
            raise ValueError(f"the run is {self.status}")
        end = next(e for e in self.ends if e > self.time * (1 + 1e-14) + 1e-12)
        while True:
            h = self._length(end)
            self._refresh(h)
            try:
                step = self.stepper.attempt(self.state, h)
                error = step.error
            except NoConvergence:
                error = 4.0 * self.tolerance
            if np.isfinite(error) and error <= self.tolerance:
                break
            self.work.rejected += 1
            self.patience = PATIENCE
            self.rung += 1 if error < 8.0 * self.tolerance else 2
            if self.longest * 0.5**self.rung < SMALLEST * self.duration:
                raise SolveError(
                    f"the time step became too small at {self.time:.6g} s; the error stays at {error:.3g} K"
                )
        self._accept(step, end)
        self.patience = max(self.patience - 1, 0)
        if step.error < GROW[0] * self.tolerance and not self.patience:
            self.rung = max(self.rung - (2 if step.error < GROW[1] * self.tolerance else 1), 0)
        return step

    def result(self) -> History:
        """Return the history so far.

        Raises
        ------
        SolveError
            The heat that came in is not the heat stored.
        """
        nodes, spaces = self._moved()
        heat_in, stored = self._heat_in(), float(nodes.sum() + spaces.sum())
        outside = self._outside_channels()
        crossed = float(self.totals.magnitude[outside].sum()) + abs(self.system.source_flow) * self.time
        # What would move all temperatures by a hundredth of a step's tolerance is the least, or a run at rest fails.
        least = 1e-2 * self.tolerance * float(self.system.whole.capacity.sum())
        inside = float(np.abs(nodes).sum() + np.abs(spaces).sum())
        through = max(0.5 * (crossed + inside), least)
        history = History(
            system=self.system.whole,
            columns=tuple(self.gauges.columns()),
            rows=self.rows.array(),
            extremes=self.extremes.values,
            events=tuple(watch.result() for watch in self.watches),
            totals=self.totals,
            initial=self._expanded(self.initial),
            final=self._expanded(self.state),
            temperature=self._read(self.state),
            heat_in=heat_in,
            heat_stored=stored,
            throughput=through,
            tolerance=self.tolerance,
            work=self.work,
            phase=self.phase,
            reached=self.reached,
            coefficients=None if self.refresh is None else self.refresh.told(self.state),
            strayed=() if self.refresh is None else tuple(self.refresh.strayed.values()),
            solver={
                "method": self.solver.method,
                "factorisations": self.solver.factorisations,
                "solves": self.solver.solves,
                "iterations": self.solver.iterations,
            },
        )
        if history.relative_closure > BALANCE_LIMIT:
            raise SolveError(
                f"the heat balance over time does not close: {heat_in:.6g} J came in and {stored:.6g} J are stored, "
                f"{history.relative_closure:.1e} of what passed through ({BALANCE_LIMIT:.0e} is allowed); "
                "the result is refused"
            )
        return history

    def _settled(self, state: State) -> State:
        """Return a state with fixed nodes at their temperature and machines switched as their thermostats say.

        Where a surface's temperature jumps, the heat that its nodes take up at once came through its boundary.
        """
        temperature = self.system.with_fixed(state.temperature, self.system.terminals(state.time))
        heat = self._into_fixed(temperature, state.temperature)
        self.totals.heat = self.totals.heat + heat
        self.totals.magnitude = self.totals.magnitude + np.abs(heat)
        running = np.array(
            [
                0 if m is None else m.settle(float(state.y[s]), int(state.running[s]), state.time)
                for s, m in enumerate(self.system.spaces.machines)
            ],
            dtype=np.int64,
        )
        return State(
            time=state.time,
            temperature=temperature,
            y=state.y,
            running=running,
        )

    def _refresh(self, h: float) -> None:
        changed = None if self.refresh is None else self.refresh(self.state, h)
        if changed is not None:
            self.adopt(changed)

    def adopt(self, system: HeatSystem) -> None:
        """Go on with equations that have other coefficients."""
        self.system = system
        before, self.solver = self.solver, StageSolver(system, self.tolerance)
        self.solver.factorisations, self.solver.solves = before.factorisations, before.solves
        self.solver.iterations = before.iterations
        self.stepper = Stepper(system, self.solver, self.phase)

    def _length(self, end: float) -> float:
        """Return the next step: a rung of the ladder, or an equal part of what is left before a bend."""
        h, left = self.longest * 0.5**self.rung, end - self.time
        if left >= 4.0 * h:
            return h
        return left / max(int(np.ceil(left / h - 1e-9)), 1)

    def _first_rung(self) -> int:
        """Return the rung whose step moves no temperature by much more than the tolerance."""
        first = self.stepper._evaluate(self.state, self.state.temperature, self.state.y, self.state.time, before=False)
        capacity = self.system.capacity if self.phase is None else self.phase.slope(self.state.temperature)
        slope = self.system.largest((first[0] / capacity)[self.system.free])
        if self.system.spaces.n:
            slope = max(slope, float(np.max(np.abs(first[1]) / self.system.spaces.capacity)))
        wanted = 4.0 * self.tolerance / slope if slope > 0.0 else self.longest
        return max(int(np.ceil(np.log2(max(self.longest / wanted, 1.0)))), 0)

    def _accept(self, step: Step, end: float) -> None:
        self.causes.look(self.system, step.start)
        s, switch = self._first_switch(step)
        state = self.stepper.at(step, s)
        stopped = False
        for watch, stop in zip(self.watches, self.stops, strict=True):
            found = watch.look(lambda part: self.stepper.at(step, part), step.start.time, step.h, s, self.tolerance)
            if found is not None and stop:
                s, stopped, switch = (found - step.start.time) / step.h, True, None
                state = self.stepper.at(step, s)
        if self.refresh is not None or self.phase is not None:  # else no law has a range to leave
            read = self._read(state)
            self.reached = np.stack([np.minimum(self.reached[0], read), np.maximum(self.reached[1], read)])
        self._integrate(step, s, state)
        self._record(step, s, state)
        self.work.steps += 1
        bend = switch is None and s == 1.0 and abs(state.time - end) <= 1e-9 * self.duration
        if bend:  # land exactly on it: what follows must not see the moment before
            state = State(time=end, temperature=state.temperature, y=state.y, running=state.running)
        if switch is not None:
            running = state.running.copy()
            running[switch[0]] = switch[1]
            state = State(time=state.time, temperature=state.temperature, y=state.y, running=running)
            self.work.switched += 1
        self.state = state
        if stopped or (bend and end == self.duration):
            self.status = "stopped" if stopped else "finished"
            self._last_row(step, s)
        elif bend:
            self.state = self._settled(state)
            self.rung = max(self.rung, self._first_rung())

    def _first_switch(self, step: Step) -> tuple[float, tuple[int, int] | None]:
        """Return the fraction at which the first machine switches, the machine and its stages then; 1 and None else."""
        first, switch = 1.0, None
        for number, machine in enumerate(self.system.spaces.machines):
            if machine is None:
                continue
            for threshold in machine.thresholds(int(step.start.running[number]), step.start.time):

                def value(s: float, number: int = number) -> float:
                    return float(self.stepper.y_at(step, s)[number])

                found = first_crossing(value, threshold.level, threshold.direction, step.h)
                if found is not None and found < first:
                    first, switch = found, (number, threshold.stages)
        return first, switch

    def _into_fixed(self, now: np.ndarray, then: np.ndarray) -> np.ndarray:
        """Return the heat that nodes with a fixed temperature took up between two temperatures, by channel, J."""
        stored = np.zeros(len(self.totals.heat))
        readers = self.system.readers
        if readers.fixed_nodes.nnz:
            stored[: len(readers.film)] = readers.fixed_nodes @ self._content(now, then)
        return stored

    def _integrate(self, step: Step, s: float, state: State) -> None:
        extra = self._into_fixed(state.temperature, step.start.temperature)
        heat = step.h * (weights_at(s) @ step.flows) + extra
        self.totals.heat = self.totals.heat + heat
        self.totals.magnitude = self.totals.magnitude + np.abs(heat)
        for part in (0.0, s):
            now = np.abs(rates_at(part) @ step.flows + extra / (s * step.h))
            self.totals.peak = np.maximum(self.totals.peak, now)

    def _record(self, step: Step, s: float, state: State) -> None:
        """Write the rows and fields whose times lie in a step, and look at what limits hold at its ends."""
        every, last = self.system.case.time.record, step.start.time + s * step.h
        extra: float | np.ndarray = 0.0
        if self.system.readers.fixed_nodes.nnz:
            extra = self._into_fixed(state.temperature, step.start.temperature) / (s * step.h)
        if self.extremes.positions:
            self.extremes.look(self.gauges.row(step.start, flows_at(step, 0.0, extra)))
            self.extremes.look(self.gauges.row(state, flows_at(step, s, extra)))
        while self.recorded * every <= last * (1 + 1e-14) and self.recorded * every <= self.duration * (1 + 1e-12):
            part = min(max((self.recorded * every - step.start.time) / step.h, 0.0), 1.0)
            if part >= s and last < self.duration * (1 - 1e-12) and part > 0.0:
                break  # the next step says what holds after a jump or switch
            row = self.gauges.row(self.stepper.at(step, part), flows_at(step, part, extra))
            self.rows.append(row)
            self.extremes.look(row)
            self.recorded += 1
        while self.fields and self.fields[0] <= last * (1 + 1e-12):
            time = self.fields.pop(0)
            if self.on_field is not None:
                self.on_field(time, self._read(self.stepper.at(step, min((time - step.start.time) / step.h, 1.0))))

    def _last_row(self, step: Step, s: float) -> None:
        if self.rows.last_time < self.time * (1 - 1e-12):
            extra = self._into_fixed(self.state.temperature, step.start.temperature) / (s * step.h)
            self.rows.append(self.gauges.row(self.state, flows_at(step, s, extra)))

    def _outside_channels(self) -> list[int]:
        """Return the channels through which heat enters the model: boundaries of no floating space, and spaces' own."""
        floats = self.system.readers.unknown >= 0
        return [*np.flatnonzero(~floats), len(self.totals.heat) - 1]

    def _heat_in(self) -> float:
        return float(self.totals.heat[self._outside_channels()].sum()) + self.system.source_flow * self.time

    def _content(self, now: np.ndarray, then: np.ndarray) -> np.ndarray:
        """Return what the unknowns hold more at one temperature than at another, J, (n_nodes,)."""
        if self.phase is None:
            return self.system.capacity * (now - then)
        return self.phase.heat(now) - self.phase.heat(then)

    def _moved(self) -> tuple[np.ndarray, np.ndarray]:
        """Return what all nodes, and all spaces and goods, hold more than at the beginning, J, (n_nodes,) and (n,)."""
        system, expand = self.system, self.system.expand
        now, then = expand(self.state.temperature), expand(self.initial.temperature)
        nodes = system.whole.capacity * (now - then) if self.phase is None else self._content(now, then)
        return nodes, system.spaces.capacity * (self.state.y - self.initial.y) if system.spaces.n else np.zeros(0)

    def _read(self, state: State) -> np.ndarray:
        """Return the nodes' temperatures within the range of their causes, °C, (n_nodes,)."""
        return self.causes.within(self.system.expand(state.temperature), state)

    def _expanded(self, state: State) -> State:
        return replace(state, temperature=self.system.expand(state.temperature))


def field_times(time) -> list[float]:
    """Return the times (s) after 0 at which whole fields are asked for, in order."""
    found = list(time.fields or ())
    if time.fields_every is not None:
        count = int(time.duration / time.fields_every * (1 + 1e-12))
        found += [n * time.fields_every for n in range(1, count + 1)]
    return sorted(set(found))
