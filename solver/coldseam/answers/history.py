"""From a run over time to its answers: events, energies, peaks, machines, and the state at the end."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

from coldseam._version import __version__
from coldseam.answers.build import SECTION_UNITS, UNITS, extremes, kind_of
from coldseam.answers.limits import FLOW_UNITS, judge
from coldseam.answers.trust import event_error
from coldseam.answers.types import Answers, BodyAnswer, BoundaryAnswer, ProbeAnswer, SpaceAnswer, place
from coldseam.case.model import Case
from coldseam.errors import CaseError, Fault
from coldseam.mesh.measure import cell_measure, facet_measure
from coldseam.mesh.types import Mesh
from coldseam.solution.fronts import Fronts
from coldseam.solution.ranges import law_remarks
from coldseam.solution.spaces import CHANNELS
from coldseam.solution.stepper import channels
from coldseam.solution.transient import History
from coldseam.volumes.conditions import boundary_film
from coldseam.volumes.section import node_shares_of_cells

HISTORY_FILE = "history.csv"
NO_INTERVAL = "the proof of the heat flows holds for steady states; over time the error is not proven"


def timed_answers(
    history: History,
    mesh_facts: dict[str, Any],
    accuracy: dict[str, Any],
    remarks: Sequence[str],
    extra: dict[str, Any],
) -> Answers:
    """Return the answers of a run over time; flows and temperatures outside ``history`` are those at its end.

    Parameters
    ----------
    history
        The finished run.
    mesh_facts
        How the mesh was made, from :func:`coldseam.answers.build.mesh_answer`.
    accuracy
        From :func:`coldseam.answers.trust.accuracy_over_time`.
    remarks
        Warnings of the run.
    extra
        What else belongs into ``history``, for example time constants.
    """
    system = history.system
    case, mesh = system.case, system.mesh
    section = mesh.dim == 2 and not mesh.axisymmetric
    units = UNITS | {"time": "s", "energy": "J", "melted": "1", "front": "mm"}
    units |= (SECTION_UNITS | {"energy": "J/m"}) if section else {}
    verdicts = timed_limits(history)
    return Answers(
        title=case.title,
        dimensions=case.model.dimensions,
        axisymmetric=mesh.axisymmetric,
        coldseam=__version__,
        case_sha256=case.source.sha256,
        units=units,
        mesh=mesh_facts | {"nodes": mesh.n_nodes, "cells": mesh.n_cells},
        accuracy=accuracy,
        balance={
            "closure": (history.heat_in - history.heat_stored) / history.final.time,
            "relative": history.relative_closure,
            "throughput": history.throughput / history.final.time,
            "heat_sources": system.source_flow,
        },
        boundaries=_boundaries(history),
        spaces=_spaces(history),
        coupling={},
        coupling_intervals={},
        probes={
            probe.name: ProbeAnswer(temperature=float(history.column("probe", probe.name)[-1]), at=place(probe.at))
            for probe in case.probe
        },
        bodies=_bodies(mesh, history),
        limits=verdicts,
        solver=history.solver | {"steps": history.work.steps, "rejected": history.work.rejected},
        warnings=(
            *case.warnings,
            *remarks,
            *_melting_warnings(history),
            *_range_warnings(history),
            *_event_warnings(history),
        ),
        history=history_answer(history, accuracy["over_time"]["share"]) | extra,
    )


def _range_warnings(history: History) -> tuple[str, ...]:
    system = history.system
    return (*law_remarks(system.case, system.mesh, *history.reached), *history.strayed)


def history_answer(history: History, share: float) -> dict[str, Any]:
    """Return what answers.json says under ``history``: s, J and W; in a cross-section per metre of depth.

    ``share`` is what the mesh may be off, from :func:`coldseam.answers.trust.accuracy_over_time`.
    """
    system, totals = history.system, history.totals
    named = channels(system)
    heat = dict(zip(named, totals.heat.tolist(), strict=True))
    peak = dict(zip(named, totals.peak.tolist(), strict=True))
    duration = history.final.time
    return {
        "file": HISTORY_FILE,
        "duration": duration,
        "asked_duration": system.case.time.duration,
        "events": {
            h.name: {
                "happened": h.time is not None,
                "time": h.time,
                "error": event_error(h.time, h.error, share),
                "error_from_steps": h.error,
                "level": h.level,
                "closest": h.closest,
                "closest_at": h.closest_at,
                "watched": watched(system.case, h.name),
            }
            for h in history.events
        },
        "energies": {
            "boundaries": {b.name: heat["boundary", b.name] for b in system.case.boundary},
            "spaces": {name: {kind: heat[kind, name] for kind in CHANNELS} for name in system.spaces.names},
            "heat_sources": system.source_flow * duration,
            "in": history.heat_in,
            "stored": history.heat_stored,
            "relative_closure": history.relative_closure,
        },
        "peaks": {"boundaries": {b.name: peak["boundary", b.name] for b in system.case.boundary}},
        "machines": {
            name: {
                "heat": -heat["cooling", name],
                "energy": heat["power", name],
                "running_share": heat["share", name] / duration,
                "running_share_at_end": _late_share(history, name),
                "peak": peak["cooling", name],
            }
            for s, name in enumerate(system.spaces.names)
            if system.spaces.machines[s] is not None
        },
        "melted": _melted(history),
        "switches": history.work.switched,
        "tolerance": history.tolerance,
    }


def _melted(history: History) -> dict[str, dict[str, Any]]:
    """Return of every melting body the melted part at both ends and where its front is at the end; mm, m² (m²/m)."""
    phase = history.phase
    if phase is None:
        return {}
    fronts = Fronts(history.system.mesh, phase).at(history.final.temperature)
    return {
        name: {
            "at_start": float(history.column("melted", name)[0]),
            "at_end": float(history.column("melted", name)[-1]),
            "front": None
            if front is None
            else {
                "area": front.area,
                "from": place(front.low.tolist()),
                "to": place(front.high.tolist()),
                "mean": place(front.mean.tolist()),
            },
        }
        for name, front in zip(phase.names, fronts, strict=True)
    }


def watched(case: Case, name: str) -> str:
    """Return in words what an event waits for."""
    when = next(event.when for event in case.event if event.name == name)
    what = (
        f"space {when.space}"
        if when.space
        else f"probe {when.probe}"
        if when.probe
        else f"{when.temperature} of {when.boundary}"
    )
    return f"{what} {'falls below' if when.direction < 0 else 'rises above'} {when.level:g} °C"


def _late_share(history: History, name: str) -> float:
    """Return the running share over the last fifth of the run, from the recorded rows."""
    time, share = history.column("time"), history.column("share", name)
    late = time >= 0.8 * time[-1]
    return float(share[late].mean()) if late.any() else float(share[-1])


def _melting_warnings(history: History) -> list[str]:
    """Say of bodies that start half way: a start at the very melting point says neither solid nor liquid."""
    parts = [(name, melted["at_start"]) for name, melted in _melted(history).items()]
    return [
        f'body "{name}" starts {100 * part:.0f} % melted: its start lies within its melting range; start it below or above to '
        "begin with it frozen or melted"
        for name, part in parts
        if 0.01 < part < 0.99
    ]


def _event_warnings(history: History) -> list[str]:
    return [
        f'event "{h.name}" did not happen within {history.final.time:g} s: '
        f"{watched(history.system.case, h.name)} was not reached; closest {h.closest:.2f} °C at {h.closest_at:.0f} s"
        for h in history.events
        if h.time is None
    ]


def timed_limits(history: History) -> dict[str, dict[str, Any]]:
    """Return verdict and margin of every limit, held against the worst of every step.

    Raises
    ------
    CaseError
        A limit on something that a run over time does not answer.
    """
    return {limit.name: _verdict(history, number, limit) for number, limit in enumerate(history.system.case.limit)}


def require_timed_limits(case: Case) -> None:
    """Raise a CaseError for limits and bridges that a run over time does not answer."""
    faults = [
        Fault(
            path=("limit", n, "quantity"),
            what=f"a run over time does not answer {limit.quantity.measure}; make a steady case for it",
        )
        for n, limit in enumerate(case.limit)
        if limit.quantity.measure not in ("heat_flow", "temperature")
    ]
    faults += [
        Fault(path=("bridge", n), what="a bridge is of a steady case; take it out or the [time] table")
        for n in range(len(case.bridge))
    ]
    if faults:
        raise CaseError(faults)


def _verdict(history: History, number: int, limit) -> dict[str, Any]:
    asked, measure = limit.quantity, limit.quantity.measure
    name = getattr(asked, asked.target)
    low, low_at, high, high_at = history.extremes[number].tolist()
    signed = any(bound is not None and bound < 0.0 for bound in (limit.at_most, limit.at_least))
    if measure == "heat_flow" and not signed:
        (low, low_at), (high, high_at) = _sizes(low, low_at, high, high_at)
    below = -np.inf if limit.at_least is None else limit.at_least - low
    above = -np.inf if limit.at_most is None else high - limit.at_most
    value, at = (high, high_at) if above >= below else (low, low_at)
    section = history.system.mesh.dim == 2 and not history.system.mesh.axisymmetric
    return {
        "quantity": {asked.target: name, measure: getattr(asked, measure)},
        "value": value,
        "low": None,
        "high": None,
        "unit": "W/m" if measure == "heat_flow" and section else FLOW_UNITS[measure],
        "at_most": limit.at_most,
        "at_least": limit.at_least,
        "size_of_flow": measure == "heat_flow" and not signed,
        "at": at,
        "over": "every step of the run",
    } | judge(value, None, None, limit.at_most, limit.at_least)


def _sizes(low: float, low_at: float, high: float, high_at: float):
    """Return least and largest absolute value between two extremes, each with its time; 0 where the sign changes."""
    small, large = sorted(((abs(low), low_at), (abs(high), high_at)))
    return ((0.0, low_at) if low <= 0.0 <= high else small), large


def _boundaries(history: History) -> dict[str, BoundaryAnswer]:
    system = history.system
    area = np.bincount(system.facet_boundary, facet_measure(system.mesh), len(system.case.boundary))
    films = {} if history.coefficients is None else history.coefficients.films
    found = {}
    for number, boundary in enumerate(system.case.boundary):
        used = films.get(boundary.name)
        film = boundary_film(system.case, boundary) if used is None else used["film"]
        flow = float(history.column("boundary", boundary.name)[-1])
        found[boundary.name] = BoundaryAnswer(
            kind=kind_of(boundary),
            space=boundary.space,
            heat_flow=flow,
            heat_flow_low=None,
            heat_flow_high=None,
            interval="none",
            interval_reason=NO_INTERVAL,
            area=float(area[number]),
            heat_flux_mean=flow / float(area[number]),
            film=float(film) if boundary.space is not None and np.isfinite(film) else None,
            film_used=used,
            temperature=extremes(system.mesh, history.temperature, system.facet_boundary == number),
        )
    return found


def _spaces(history: History) -> dict[str, SpaceAnswer]:
    found = {}
    for name in history.system.case.spaces:
        facing = [b.name for b in history.system.case.boundary if b.space == name]
        found[name] = SpaceAnswer(
            heat_flow=float(sum(history.column("boundary", b)[-1] for b in facing)),
            heat_flow_low=None,
            heat_flow_high=None,
            interval="none",
            interval_reason=NO_INTERVAL,
            temperature=float(history.column("space", name)[-1]),
        )
    return found


def _bodies(mesh: Mesh, history: History) -> dict[str, BodyAnswer]:
    volume, t = cell_measure(mesh), history.temperature
    gaps = {} if history.coefficients is None else history.coefficients.gaps
    found = {}
    for number, body in enumerate(mesh.bodies):
        cells = mesh.cell_body == number
        if not cells.any():
            continue
        share = node_shares_of_cells(mesh, cells.astype(float))
        nodes = np.unique(mesh.cells[cells])
        found[body.name] = BodyAnswer(
            material=body.material,
            volume=float(volume[cells].sum()),
            mean_temperature=float(share @ t / share.sum()),
            min_temperature=float(t[nodes].min()),
            max_temperature=float(t[nodes].max()),
            heat_source=float((history.system.given.source[cells] * volume[cells]).sum()),
            loss_share=0.0,
            air_gap=gaps.get(body.name),
        )
    return found


def headings(history: History) -> list[str]:
    """Return the headings of history.csv, with units.

    Examples
    --------
    ``time_s``, ``space cold_room degC``, ``boundary walls W``
    """
    return [
        "time_s" if c.kind == "time" else f"{_WORDS.get(c.kind, c.kind)} {c.name} {_UNIT[c.unit]}".replace("  ", " ")
        for c in history.columns
    ]


_UNIT = {"degC": "degC", "W": "W", "W/m": "W_per_m", "1": "1", "s": "s", "mm": "mm"}
_WORDS = {"min": "coldest", "mean": "mean", "max": "warmest", "boundary": "flow", "outside": "spaces from outside"}
_WORDS |= {f"front_{end}_{axis}": f"front {end} {axis} in" for end in ("from", "to") for axis in "xyz"}
