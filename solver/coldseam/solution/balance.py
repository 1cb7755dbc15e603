"""The steady balance of floating spaces: what temperature they settle at, and whether their machines can hold them.

Lambda of the node network gives the heat that each terminal sends into the solid as a linear function of all terminal
temperatures, so the spaces' balance is a small system. A machine is in one of three modes: it holds its setpoint with
what that needs, runs all the time and can't, or stands still. The modes are found by trying.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from coldseam.case.overtime import held
from coldseam.case.schedules import span_of, value_at
from coldseam.errors import SolveError
from coldseam.solution.spaces import Spaces, floating_spaces, outside_range

if TYPE_CHECKING:
    from coldseam.case.model import Case

MOST_TRIES = 30


@dataclass(frozen=True, kw_only=True, eq=False)
class Balance:
    """Where floating spaces settle.

    Parameters
    ----------
    y
        Temperatures of spaces, then goods, °C, (n,).
    mode
        ``"hold"``, ``"full"``, ``"off"`` or ``""`` (no machine) of every space.
    cooling
        Heat that each machine takes, W, (n_spaces,).
    full
        What it could take at that temperature, W.
    """

    y: np.ndarray
    mode: tuple[str, ...]
    cooling: np.ndarray
    full: np.ndarray


def balance(spaces: Spaces, form: np.ndarray, behind: np.ndarray, outside: np.ndarray, time: float = 0.0) -> Balance:
    """Return the steady state of the floating spaces.

    Parameters
    ----------
    spaces
        The unknowns outside the mesh.
    form
        Lambda of the network, W/K, (n_terminals [+ 1],) squared.
    behind
        Floating space behind every terminal, -1 where none, (n_terminals,).
    outside
        Temperature of the other terminals, °C, (n_terminals,).
    time
        s, at which schedules are read.

    Raises
    ------
    SolveError
        No steady state: a space that loses heat to nothing.
    """
    modes = ["" if machine is None else "hold" for machine in spaces.machines]
    for _ in range(MOST_TRIES):
        y, cooling = _settle(spaces, form, behind, outside, time, modes)
        full = np.array([0.0 if m is None else _full(spaces, s, y, time)[0] for s, m in enumerate(spaces.machines)])
        changed = False
        for s, mode in enumerate(modes):
            setpoint = value_at(spaces.floating(s).cooling.setpoint, time) if mode else 0.0
            new = mode
            if mode == "hold":
                new = "off" if cooling[s] < 0.0 else "full" if cooling[s] > full[s] else "hold"
            elif mode == "full" and y[s] < setpoint - 1e-9:
                new = "hold"
            elif mode == "off" and y[s] > setpoint + 1e-9:
                new = "hold"
            changed |= new != mode
            modes[s] = new
        if not changed:
            return Balance(y=y, mode=tuple(modes), cooling=cooling, full=full)
    raise SolveError(
        "the steady balance of the floating spaces was not found: their machines have no common steady state"
    )


def _full(spaces: Spaces, s: int, y: np.ndarray, time: float) -> tuple[float, float]:
    return spaces.machines[s].full(float(y[s]), spaces.ambient(s, y, time), time)


def _settle(spaces: Spaces, form, behind, outside, time: float, modes) -> tuple[np.ndarray, np.ndarray]:
    """Return the temperatures for given modes, and each machine's heat."""
    n, s_count = spaces.n, len(spaces.names)
    gather = np.zeros((len(behind), n))
    gather[np.flatnonzero(behind >= 0), behind[behind >= 0]] = 1.0
    films = form[: len(behind), : len(behind)]
    drive = films @ np.where(behind < 0, outside, 0.0) + (form[: len(behind), -1] if len(form) > len(behind) else 0.0)
    hold = np.array([mode == "hold" for mode in modes] + [False] * (n - s_count))
    y = np.full(n, float(outside[behind < 0].mean()) if np.any(behind < 0) else 0.0)
    for s in np.flatnonzero(hold):
        y[s] = value_at(spaces.floating(s).cooling.setpoint, time)
    running, cooling = np.zeros(s_count, dtype=np.int64), np.zeros(s_count)
    for _ in range(100):
        flows, slope = spaces.flows(y, running, time, machines=False)
        rest = spaces.heat(flows, y, time) - gather.T @ (drive + films @ (gather @ y))
        slope = slope - gather.T @ films @ gather
        for s, mode in enumerate(modes):
            if mode == "full":
                cooling[s], falls = _full(spaces, s, y, time)
                rest[s] -= cooling[s]
                slope[s, s] -= falls
            elif mode == "off":
                cooling[s] = 0.0
        cooling[hold[:s_count]] = rest[:s_count][hold[:s_count]]
        move = ~hold
        if not move.any():
            return y, cooling
        try:
            step = np.linalg.solve(slope[np.ix_(move, move)], -rest[move])
        except np.linalg.LinAlgError as error:
            raise SolveError("a floating space exchanges heat with nothing and has no steady temperature") from error
        y[move] += step
        if np.max(np.abs(step)) <= 1e-10 * (1.0 + np.max(np.abs(y))):
            if np.max(np.abs(y)) > 1e5:
                break
            return y, cooling
    raise SolveError(
        "a floating space has no steady temperature within reason; look at its gain and its machine's capacity"
    )


def floating_names(case: Case) -> tuple[str, ...]:
    """Return the names of the floating spaces."""
    return tuple(name for name, space in case.spaces.items() if space.floating is not None)


def at_balance(case: Case, given, response) -> tuple[Case, np.ndarray, tuple[str, ...]]:
    """Return a steady case with its floating spaces at their balance temperatures.

    Parameters
    ----------
    case
        The case, without ``[time]``.
    given, response
        Conditions and unit fields of :func:`held_at_guess` of it.

    Returns
    -------
    case
        With constant temperatures.
    terminals
        Temperature of every terminal, °C, (n_terminals,).
    remarks
        What is to be said of its machines.
    """
    spaces = floating_spaces(case)
    rooms = [case.boundary[terminal.boundaries[0]].space for terminal in given.terminals]
    behind = np.array([spaces.names.index(name) if name in spaces.names else -1 for name in rooms])
    outside = np.array([terminal.temperature for terminal in given.terminals])
    found = balance(spaces, response.network.energy(response.fields), behind, outside)
    temperatures = {name: value_at(s.temperature, 0.0) for name, s in case.spaces.items() if s.temperature is not None}
    temperatures |= {name: float(found.y[s]) for s, name in enumerate(spaces.names)}
    terminals = np.where(behind >= 0, found.y[np.maximum(behind, 0)], outside)
    return held(case, temperatures, {}), terminals, machine_remarks(spaces, found)


def machine_remarks(spaces: Spaces, found: Balance, when: str = "") -> tuple[str, ...]:
    """Return a sentence for every machine: the share it must run, or that it can't hold its setpoint."""
    remarks = []
    for s, mode in enumerate(found.mode):
        if not mode:
            continue
        name, setpoint = spaces.names[s], value_at(spaces.floating(s).cooling.setpoint, 0.0)
        if mode == "full":
            remarks.append(
                f'the machine of "{name}" can never hold {setpoint:g} °C{when}: running all the time it takes '
                f"{found.cooling[s]:.4g} W and the space settles at {found.y[s]:.1f} °C"
            )
    return tuple(remarks)


def held_at_guess(case: Case) -> Case:
    """Return a steady case with floating spaces at a guess: setpoint, start, or the middle of the others."""
    middle = 0.5 * sum(outside_range(case)) if any(s.temperature is not None for s in case.spaces.values()) else 20.0
    return held(case, {name: guess(case, name, middle) for name in case.spaces}, {})


def guess(case: Case, name: str, middle: float) -> float:
    """Return a plausible steady temperature of a space, °C."""
    space = case.spaces[name]
    if space.temperature is not None:
        return 0.5 * sum(span_of(space.temperature))
    if space.floating.cooling is not None:
        return 0.5 * sum(span_of(space.floating.cooling.setpoint))
    return middle if space.floating.start is None else space.floating.start
