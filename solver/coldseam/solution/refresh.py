"""Coefficients that depend on the temperatures, followed through a run over time.

Before a step they are evaluated at the field that the middle of the step is expected to have (the present one and half
of what the last step changed), and kept over the step; the equations are made anew only when they moved by
more than ``MOVED``. What a boundary exchanges with other than its space's air (surroundings, sky, sun) enters as a heat
flux, so that the air may follow a schedule or float.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from coldseam.errors import CaseError, Fault
from coldseam.solution.coefficients import SAME, depends, evaluate, facing_air
from coldseam.solution.enclosed import cavity_models
from coldseam.solution.heatsystem import HeatSystem, held_for_structure, with_conditions
from coldseam.solution.stepper import State
from coldseam.volumes.conditions import Conditions

KEPT = ("conductivity", "film", "flux", "sheet_conductance")
"""The fields of the conditions that follow the temperatures."""
MOVED = 2e-3
"""Relative change of a film, a conductivity or a heat flux from which the equations are made anew."""


class Refresher:
    """Makes the equations anew when their coefficients have moved; called with the state before every step.

    Parameters
    ----------
    system
        The equations at the beginning, coefficients as yet unknown.
    """

    def __init__(self, system: HeatSystem):
        self.system = system
        self.base = system.given
        self.case = held_for_structure(system.case)
        self.cavities = cavity_models(self.case, system.mesh, system.facet_boundary)
        self.present: Conditions | None = None
        self.before: State | None = None
        self.count = 0

    def __call__(self, state: State) -> HeatSystem | None:
        """Return the equations for the next step, None where the present ones do."""
        given = self._at(state)
        self.before = state
        if self.present is not None and not moved(self.present, given):
            return None
        self.present = given
        self.system = with_conditions(self.system, given)
        self.count += 1
        return self.system

    def memory(self) -> dict[str, np.ndarray]:
        """Return what a checkpoint must keep of it, arrays by name; empty before the first step."""
        if self.before is None or self.present is None:
            return {}
        kept = {name: getattr(self.present, name) for name in KEPT}
        return kept | {"before": np.append(self.before.time, self.before.temperature)}

    def recall(self, kept: dict[str, np.ndarray]) -> HeatSystem | None:
        """Return the equations that :meth:`memory` (arrays by name, such as film, W/(m² K), (n_facets,)) was taken with.

        None where it was empty.
        """
        if not kept:
            return None
        empty = np.zeros(0)
        time, temperature = float(kept["before"][0]), kept["before"][1:]
        self.before = State(time=time, temperature=temperature, y=empty, running=empty.astype(np.int64))
        self.present = replace(self.base, **{name: kept[name] for name in KEPT})
        self.system = with_conditions(self.system, self.present)
        return self.system

    def _at(self, state: State) -> Conditions:
        field = state.temperature
        if self.before is not None and self.before.time < state.time:
            field = field + 0.5 * (field - self.before.temperature)
        spaces = self.system.spaces
        air = {name: spaces.temperature_of(name, state.y, state.time) for name in self.system.case.spaces}
        mesh, facet_boundary = self.system.mesh, self.system.facet_boundary
        found = evaluate(self.case, mesh, facet_boundary, self.base, field, air, self.cavities).given
        self._require_air(found, air)
        return replace(facing_air(self.case, found, air, self.base.terminals), terminals=self.base.terminals)

    def _require_air(self, found: Conditions, air: dict[str, float]) -> None:
        """Raise a CaseError where a floating space's surfaces meet more than its air: its balance would not know of it."""
        for terminal in found.terminals:
            space = self.case.boundary[terminal.boundaries[0]].space
            if space in self.system.spaces.names and abs(terminal.temperature - air[space]) > SAME:
                what = "surfaces of a floating space exchange heat with its air only; take surroundings and sun out"
                raise CaseError([Fault(path=("spaces", space), what=what)])


def moved(one: Conditions, other: Conditions) -> bool:
    """Return whether any coefficient differs by more than ``MOVED`` of itself."""
    pairs = ((one.film, other.film), (one.conductivity, other.conductivity), (one.flux, other.flux))
    return any(
        bool(np.max(np.abs(b - a), initial=0.0) > MOVED * max(float(np.max(np.abs(a), initial=0.0)), 1e-300))
        if a is one.flux
        else bool(np.any(np.abs(b - a) > MOVED * np.abs(a)))
        for a, b in pairs
    )


def refresher(system: HeatSystem) -> Refresher | None:
    """Return what follows the coefficients of a case, None where none depend on the temperatures."""
    return Refresher(system) if depends(system.case) else None
