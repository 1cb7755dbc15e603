"""The range that temperatures over time can have: that of their causes so far.

Where no heat is released or drawn, no place is ever colder or warmer than the start, what is outside and the floating
spaces have been (maximum principle, which melting keeps to as well). Badly shaped cells can lift a node beyond that. As in
steady runs temperatures are *read* within the range, which only brings them nearer; the equations go on with what they hold,
so that the heat balance is untouched.
"""

from __future__ import annotations

import numpy as np

from coldseam.case.schedules import span_of
from coldseam.solution.heatsystem import HeatSystem
from coldseam.solution.stepper import State
from coldseam.volumes.conditions import Conditions


class Causes:
    """Follows the range through a run.

    Parameters
    ----------
    system
        The equations: what is outside, over the whole run.
    initial
        The state at the start.
    """

    def __init__(self, system: HeatSystem, initial: State):
        courses = system.terminal_course[: system.network.n_terminals]
        sun = system.terminal_course[system.network.n_terminals :]
        begun = system.expand(initial.temperature)
        spans = [span_of(course) for course in courses if course is not None]
        self.low = min([float(begun.min()), *(low for low, _ in spans)])
        self.high = max([float(begun.max()), *(high for _, high in spans)])
        if any(course is not None and span_of(course)[1] > 0.0 for course in sun):
            self.high = np.inf
        self.given: Conditions | None = None
        self.look(system, initial)

    def look(self, system: HeatSystem, state: State) -> None:
        """Take into account where floating spaces are (°C), and heat that the present equations release or draw."""
        self.low, self.high = self._with(state)
        if system.given is self.given:
            return
        self.given = system.given
        heat = np.concatenate([system.given.source, system.given.flux])
        self.low = -np.inf if np.any(heat < 0) else self.low
        self.high = np.inf if np.any(heat > 0) else self.high

    def within(self, temperatures: np.ndarray, state: State) -> np.ndarray:
        """Return temperatures in a state as they are read, °C, (n,)."""
        return np.clip(temperatures, *self._with(state))

    def _with(self, state: State) -> tuple[float, float]:
        return min(self.low, *state.y, np.inf), max(self.high, *state.y, -np.inf)
