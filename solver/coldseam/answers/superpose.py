"""The same model at other temperatures of its spaces, without solving again.

Steady conduction with constant conductivities and films is linear: the field is the sum of unit fields times
temperatures, and every heat flow and its bounds are read from small matrices. All answers follow; moisture
needs no more than the surfaces' temperatures.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping
from typing import TYPE_CHECKING

import numpy as np

from coldseam.case.read import replace
from coldseam.errors import CaseError, Fault
from coldseam.solution.readings import boundary_intervals, space_intervals, tolerated
from coldseam.solution.rounds import Solution
from coldseam.solution.steady import Steady, boundary_flows
from coldseam.volumes.conditions import boundary_temperature

if TYPE_CHECKING:
    from coldseam.case.model import Case


def superposed(solution: Solution, temperatures: Mapping[str, float | str]) -> Solution:
    """Return the solution at other temperatures of some spaces.

    Parameters
    ----------
    solution
        A solved case.
    temperatures
        By name of the space: °C, or text with its unit.

    Raises
    ------
    CaseError
        An unknown space, a temperature that can't be read, touching fixed surfaces that would no longer be alike, or
        a case that depends on temperatures.
    """
    steady = solution.steady
    if steady.settled is not None:
        what = (
            "this case's films or conductivities depend on the temperatures, so its answers can't be superposed; "
            "change the temperature in the case and run it again"
        )
        raise CaseError([Fault(path=("spaces",), what=what)])
    case = at_temperatures(steady.case, temperatures)
    changed = _at(steady, case)
    error = _error(changed)
    rounds = (*solution.rounds[:-1], dataclasses.replace(solution.rounds[-1], error=error))
    return dataclasses.replace(solution, steady=changed, rounds=rounds, flows_met=error is None or error <= 1.0)


def at_temperatures(case: Case, temperatures: Mapping[str, float | str]) -> Case:
    """Return a case with other temperatures of some spaces (°C, or text with its unit).

    Raises
    ------
    CaseError
        An unknown space, or a temperature that can't be read.
    """
    unknown = [name for name in temperatures if name not in case.spaces]
    if unknown:
        known = ", ".join(case.spaces)
        what = f"there is no such space; the case has {known}"
        raise CaseError([Fault(path=("spaces", name), what=what) for name in unknown])
    for name, value in temperatures.items():
        case = replace(case, ("spaces", name, "temperature"), value)
    return case


def _at(steady: Steady, case: Case) -> Steady:
    terminals = []
    for terminal in steady.given.terminals:
        new = {boundary_temperature(case, case.boundary[b]) for b in terminal.boundaries}
        if len(new) > 1:
            names = ", ".join(f'"{case.boundary[b].name}"' for b in terminal.boundaries)
            what = f"the fixed surfaces {names} touch and were solved as one; apart they need their own run"
            raise CaseError([Fault(path=("spaces",), what=what)])
        terminals.append(dataclasses.replace(terminal, temperature=new.pop()))
    outside = np.array([terminal.temperature for terminal in terminals])
    reference = 0.5 * float(outside.min() + outside.max())
    network = steady.response.network
    state = np.append(outside - reference, [1.0] * network.has_load)
    given = dataclasses.replace(steady.given, terminals=tuple(terminals))
    relative = steady.response.fields @ state
    flow = boundary_flows(steady.mesh, steady.facet_boundary, given, network, relative, state, len(case.boundary))
    return dataclasses.replace(
        steady,
        case=case,
        given=given,
        state=state,
        reference=reference,
        temperature=relative + reference,
        boundary_flow=flow,
    )


def _error(steady: Steady) -> float | None:
    """Return the worst error of a heat flow over what the accuracy allows; None without bounds."""
    if steady.bounds is None:
        return None
    group = {b for terminal in steady.given.terminals if len(terminal.boundaries) > 1 for b in terminal.boundaries}
    single = [interval for n, interval in enumerate(boundary_intervals(steady)) if n not in group]
    found = [*single, *space_intervals(steady).values()]
    allowed = [tolerated(steady, interval) for interval in found]
    return max((i.error / a for i, a in zip(found, allowed, strict=True) if a > 0.0), default=0.0)
