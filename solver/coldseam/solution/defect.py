"""How far a reduced run is off: the heat that its temperatures leave unbalanced, put through the full equations.

A reduced run takes the steps that the full one would take, so its error e = T - W w obeys the full equations with the
reduced run's residual as the only heat,

    C de/dt = -A e + G e_y + r(t),   r = b + B t + G y - A W w - C W dw/dt     (r = 0 along the basis),

and likewise e_y of the spaces, whose own balances have no residual. r is integrated over intervals with the stepper's
own weights, so that what it does between two moments can't be missed and the step's own error is not taken for the
basis's. Then e is stepped by implicit Euler over these intervals, with a few kept factors: one solve of the full system
each. Intervals grow in a ladder from the start, from the largest jumps, where a basis is worst, and late in the run where
a machine may go on and off; they keep to the first bends after these. What lies between is gathered in long ones, whose
means hide what alternates within: the same inputs have been seen closely before. Implicit Euler smears and meets the worst
moment only by chance, hence SAFETY; on runs compared with full stepping the estimate without it was off by a factor of
2 at most (tests/solution/test_reduced.py compares again). What it does not tell: where the error of a step lies at a
threshold, either run may take a longer step than the other and a thermostat switch a little earlier, which moves the
history by parts of the step's own tolerance.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np

from coldseam.solution.heatsystem import HeatSystem
from coldseam.solution.reduced import ReducedSystem
from coldseam.solution.stepper import GAMMA, State, Step, Stepper, weights_at

SAFETY = 3.0
EACH = 3
"""Intervals of one length before the next longer one."""
WINDOWS = 2
"""Jumps besides the start from which intervals begin short again."""
LATE = 0.75
"""Part of the run after which intervals begin short once more where a machine may switch on and off."""
PIECES = 8
"""Bends after the start or such a jump at which intervals end: a period of a sine (``CORNERS_OF_A_SINE``)."""
QUIET = 0.01  # of the mean flow: boundaries' errors are relative to no less


@dataclass
class Interval:
    """Integrals of a reduced run between two moments.

    Parameters
    ----------
    end
        s.
    pole
        Length (s) with which the error is stepped: that of a kept factor, nearest to the interval's own.
    length
        How much of it the run has passed, s.
    w, y, t
        Integrals of the unknowns, (n_unknowns,), of spaces and goods, (n,), and of terminals, (n_terminals,), K s.
    taken
        What the unknowns took up, (n_unknowns,).
    flows
        Heat by channel, J, (n_channels,).
    state
        Where the last step in it began.
    """

    end: float
    pole: float
    length: float = 0.0
    w: np.ndarray = field(default_factory=lambda: np.zeros(1))
    y: np.ndarray = field(default_factory=lambda: np.zeros(1))
    t: np.ndarray = field(default_factory=lambda: np.zeros(1))
    taken: np.ndarray = field(default_factory=lambda: np.zeros(1))
    flows: np.ndarray = field(default_factory=lambda: np.zeros(1))
    state: State | None = None


@dataclass(frozen=True, kw_only=True, eq=False)
class Defect:
    """What was found.

    Parameters
    ----------
    errors
        Of the free nodes at the intervals' ends, K, (n_free, n_intervals).
    largest
        Of nodes, spaces and goods, with the safety, K.
    flow
        Largest error of a boundary's flow, over the largest flow of the same interval, with the safety.
    """

    errors: np.ndarray
    largest: float
    flow: float


def ladder_of(first: float, duration: float, ratio: float) -> list[float]:
    """Return interval lengths (s) in a ratio, such that EACH of all reach over a run (s); the shortest is near ``first``."""
    longest = duration * (ratio - 1.0) / (ratio * EACH)
    count = max(int(np.ceil(np.log(max(longest / first, 1.0)) / np.log(ratio))), 0) + 1
    return [longest * ratio ** -float(n) for n in reversed(range(count))]


def intervals_of(
    system: HeatSystem, bends: Sequence[float], duration: float, lengths: Sequence[float]
) -> list[Interval]:
    """Return the intervals of a run.

    Parameters
    ----------
    system
        The equations.
    bends
        Times at which schedules bend or jump, s, ascending.
    duration
        Of the run, s.
    lengths
        From :func:`ladder_of`, s.
    """
    inner = [bend for bend in bends if 0.0 < bend < duration * (1 - 1e-12)]

    def jump(bend: float) -> float:
        return float(np.abs(system.terminals(bend) - system.terminals(bend, before=True)).max(initial=0.0))

    largest = sorted(inner, key=lambda bend: (-jump(bend), abs(bend - 0.5 * duration)))[:WINDOWS]
    late = [LATE * duration] if any(machine is not None for machine in system.spaces.machines) else []
    starts = sorted({0.0, *largest, *late, duration})
    found: list[Interval] = []
    for start, end in zip(starts[:-1], starts[1:], strict=True):
        cuts = [bend for bend in inner if start < bend < end][:PIECES]
        now, ladder = start, [length for length in lengths for _ in range(EACH)]
        while now < end:
            reach = now + (ladder.pop(0) if len(ladder) > 1 else ladder[0])
            until = min([reach, *(cut for cut in cuts if cut > now * (1 + 1e-12)), end])
            if end - until < lengths[0]:
                until = end
            found.append(Interval(end=until, pole=_nearest(lengths, until - now)))
            now = until
    return found


def _nearest(lengths: Sequence[float], length: float) -> float:
    return min(lengths, key=lambda entry: abs(np.log(entry / length)))


class Ledger:
    """Gathers a run's integrals by interval.

    Parameters
    ----------
    system
        The reduced equations.
    intervals
        Without gaps, the first from time 0.
    """

    def __init__(self, system: ReducedSystem, intervals: list[Interval]):
        self.system, self.intervals, self.position = system, intervals, 0

    def enter(self, step: Step, reached: float) -> None:
        """Enter a step as far as it was gone, to a time (s)."""
        begun, h, low = step.start.time, step.h, 0.0
        known = self.system.terminals
        terminals = (known(begun), known(begun + GAMMA * h), known(begun + h, before=True))
        while self.position < len(self.intervals):
            interval = self.intervals[self.position]
            high = (min(interval.end, reached) - begun) / h
            if high > low:
                weights = h * (weights_at(high) - weights_at(low))
                interval.length += (high - low) * h
                interval.w = interval.w + _sum(weights, step.temperatures)
                interval.y = interval.y + _sum(weights, step.ys)
                interval.t = interval.t + _sum(weights, terminals)
                interval.taken = interval.taken + weights @ step.node_heat
                interval.flows = interval.flows + weights @ step.flows
                interval.state = step.start
                low = high
            if interval.end > reached * (1 + 1e-13):
                return
            self.position += 1


def _sum(weights: np.ndarray, values: Sequence[np.ndarray]) -> np.ndarray:
    return weights[0] * values[0] + weights[1] * values[1] + weights[2] * values[2]


def defect(stepper: Stepper, ledger: Ledger, begun: np.ndarray) -> Defect:
    """Return the error of a finished reduced run.

    Parameters
    ----------
    stepper
        Of the full equations.
    ledger
        Of the run.
    begun
        By how much its beginning is off, K, (n_nodes,).
    """
    full, system = stepper.system, ledger.system
    passed = [(i, i.state) for i in ledger.intervals if i.length > 0.0 and i.state is not None]
    nodes, spaces = begun, np.zeros(full.spaces.n)
    errors, largest, flow = [], [full.largest(begun[full.free])], [0.0]
    count = len(full.case.boundary)
    quiet = QUIET * np.abs(sum(i.flows[:count] for i, _ in passed)).max() / sum(i.length for i, _ in passed)
    for interval, state in passed:
        part = interval.pole / interval.length
        known = full.capacity * nodes + part * _unbalanced(full, system, interval)
        x, spaces = stepper.filtered(
            state, stepper.solver.factor(interval.pole), known, full.spaces.capacity * spaces, state.y, state.time
        )
        nodes = np.zeros(len(full.capacity))
        nodes[full.free] = x
        errors.append(x)
        largest.append(max(full.largest(x), float(np.max(np.abs(spaces), initial=0.0))))
        most = max(np.abs(interval.flows[:count]).max() / interval.length, quiet, 1e-300)
        flow.append(float(np.abs(_flow_errors(full, nodes, spaces)).max()) / most)
    return Defect(errors=np.column_stack(errors), largest=SAFETY * float(max(largest)), flow=SAFETY * float(max(flow)))


def _unbalanced(full: HeatSystem, system: ReducedSystem, interval: Interval) -> np.ndarray:
    """Return the integral of r, J, (n_nodes,); fixed nodes don't matter."""
    own = np.concatenate(
        [interval.taken[: len(system.basis.rates)], np.zeros(len(system.capacity) - len(system.basis.rates))]
    )
    heat = (
        full.drive @ interval.t - full.network.matrix @ system.expand(interval.w) - full.capacity * system.expand(own)
    )
    if full.spaces.n:
        heat += full.coupling @ interval.y
    return heat + interval.length * full.network.load if full.network.has_load else heat


def _flow_errors(full: HeatSystem, nodes: np.ndarray, spaces: np.ndarray) -> np.ndarray:
    """Return what errors of nodes and spaces (K) make of the boundaries' flows, W, (n_boundaries,)."""
    readers = full.readers
    heat = -(full.network.matrix @ nodes)
    outside = np.zeros(len(readers.film))
    if full.spaces.n:
        heat += full.coupling @ spaces
        outside = np.where(readers.unknown >= 0, spaces[readers.unknown], 0.0)
    return readers.film * outside - readers.film_nodes @ nodes - readers.fixed_nodes @ heat
