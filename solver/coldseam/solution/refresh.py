"""Coefficients that depend on the temperatures, followed through a run over time.

Before a step they are evaluated for its middle, at the field expected then (the last step's change carried on), and kept
over the step; the equations are made anew only when they moved by more than ``MOVED``. What a boundary exchanges
with other than its space's air (surroundings, sky) enters as a heat flux, so that the air may follow a schedule or
float. The sun is no part of this: see solution/heatsystem.py.
"""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from coldseam.case.overtime import at_moment
from coldseam.case.schedules import constant
from coldseam.errors import CaseError, Fault
from coldseam.solution.coefficients import SAME, Coefficients, depends, evaluate, facing_air
from coldseam.solution.enclosed import cavity_models
from coldseam.solution.heatsystem import HeatSystem, held_for_structure, with_conditions
from coldseam.solution.ranges import film_remark, require_fluids
from coldseam.solution.stepper import State
from coldseam.volumes.conditions import Conditions

if TYPE_CHECKING:
    from coldseam.case.model import Case

KEPT = ("conductivity", "film", "flux", "sheet_conductance")
"""The fields of the conditions that follow the temperatures."""
MOST_AHEAD = 2.0
"""Steps of the last one's length that its change is carried on over, at most."""
MOVED = 2e-3
"""Relative change of a film or a conductivity from which the equations are made anew."""
MOVED_FLUX = 5e-4
"""The same of a heat flux, over the largest: what radiates to a sky is many times what flows into an insulated wall."""


class Refresher:
    """Makes the equations anew when their coefficients have moved; called before every step with its state and length.

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
        self.last: State | None = None
        self.strayed: dict[str, str] = {}
        self.count = 0

    def __call__(self, state: State, h: float = 0.0) -> HeatSystem | None:
        """Return the equations for the next step, of length h (s); None where the present ones do."""
        given = self._at(state, h)
        if self.last is None or state.time > self.last.time:
            self.before, self.last = self.last, state
        if self.present is not None and not moved(self.present, given):
            return None
        self.present = given
        self.system = with_conditions(self.system, given)
        self.count += 1
        return self.system

    def memory(self) -> dict[str, np.ndarray]:
        """Return what a checkpoint must keep of it, arrays by name; empty before the first step."""
        if self.last is None or self.present is None:
            return {}
        kept = {name: getattr(self.present, name) for name in (*KEPT, *(["tensors"] if self.present.turned else []))}
        return kept | {"last": np.append(self.last.time, self.last.temperature)}

    def recall(self, kept: dict[str, np.ndarray]) -> HeatSystem | None:
        """Return the equations that :meth:`memory` (arrays by name, such as film, W/(m² K), (n_facets,)) was taken with.

        None where it was empty.
        """
        if not kept:
            return None
        empty = np.zeros(0)
        time, temperature = float(kept["last"][0]), kept["last"][1:]
        self.last = State(time=time, temperature=temperature, y=empty, running=empty.astype(np.int64))
        self.present = replace(self.base, **{name: kept[name] for name in (*KEPT, "tensors") if name in kept})
        self.present = replace(self.present, turned="tensors" in kept)
        self.system = with_conditions(self.system, self.present)
        return self.system

    def _at(self, state: State, h: float) -> Conditions:
        field, middle = state.temperature, state.time + 0.5 * h
        past = self.last if self.last is not None and self.last.time < state.time else self.before
        if past is not None:
            reach = min(h / (state.time - past.time), MOST_AHEAD)
            field = field + 0.5 * reach * (field - past.temperature)
        spaces = self.system.spaces
        air = {name: spaces.temperature_of(name, state.y, middle) for name in self.system.case.spaces}
        case = at_moment(self.case, middle)
        cavities = tuple(replace(model, surroundings=_seen(case, model.name)) for model in self.cavities)
        mesh, facet_boundary = self.system.mesh, self.system.facet_boundary
        found = evaluate(case, mesh, facet_boundary, self.base, field, air, cavities)
        self._note(found, middle)
        self._require_air(found.given, air)
        return replace(facing_air(case, found.given, air, self.base.terminals), terminals=self.base.terminals)

    def _note(self, found: Coefficients, time: float) -> None:
        """Keep the first warning of every boundary whose film leaves its range; fluids without properties end the run."""
        require_fluids(self.case, found)
        for name, used in found.films.items():
            remark = film_remark(name, used)
            if remark and name not in self.strayed:
                self.strayed[name] = f"{remark} (first at {time:.4g} s)"

    def told(self, state: State) -> Coefficients:
        """Return the coefficients, and what was used, at a state of the run: for its answers."""
        case = at_moment(self.system.case, state.time)
        spaces = self.system.spaces
        air = {name: spaces.temperature_of(name, state.y, state.time, before=True) for name in case.spaces}
        cavities = tuple(replace(model, surroundings=_seen(case, model.name)) for model in self.cavities)
        mesh, facet_boundary = self.system.mesh, self.system.facet_boundary
        return evaluate(case, mesh, facet_boundary, self.base, state.temperature, air, cavities)

    def _require_air(self, found: Conditions, air: dict[str, float]) -> None:
        """Raise a CaseError where a floating space's surfaces meet more than its air: its balance would not know of it."""
        for terminal in found.terminals:
            space = self.case.boundary[terminal.boundaries[0]].space
            if space in self.system.spaces.names and abs(terminal.temperature - air[space]) > SAME:
                what = "surfaces of a floating space exchange heat with its air only; take surroundings and sky out"
                raise CaseError([Fault(path=("spaces", space), what=what)])


def _seen(case: Case, cavity: str) -> float | None:
    found = case.cavities[cavity].surroundings
    return None if found is None else constant(found)


def moved(one: Conditions, other: Conditions) -> bool:
    """Return whether any coefficient differs by more than ``MOVED`` of itself, or a flux by ``MOVED_FLUX``."""
    largest = max(float(np.max(np.abs(one.flux), initial=0.0)), 1e-300)
    if np.max(np.abs(other.flux - one.flux), initial=0.0) > MOVED_FLUX * largest:
        return True
    if one.turned and np.max(np.abs(other.tensors - one.tensors), initial=0.0) > MOVED:
        return True
    pairs = (
        (one.film, other.film),
        (one.conductivity, other.conductivity),
        (one.sheet_conductance, other.sheet_conductance),
    )
    return any(bool(np.any(np.abs(b - a) > MOVED * np.abs(a))) for a, b in pairs)


def refresher(system: HeatSystem) -> Refresher | None:
    """Return what follows the coefficients of a case, None where none depend on the temperatures."""
    return Refresher(system) if depends(held_for_structure(system.case)) else None
