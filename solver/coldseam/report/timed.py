"""What the summary says of a run over time: the answers first, then machines, heat and time constants."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from coldseam.report.history import scale_of
from coldseam.report.shown import Shown

Answers = Mapping[str, Any]
METRIC = Shown()


def duration_text(seconds: float) -> str:
    """Return a duration (s) as a person reads it, to the second below a day.

    >>> duration_text(12154.3), duration_text(42.4), duration_text(200000.0)
    ('3 h 22 min 34 s', '42 s', '2 d 7 h 33 min')
    """
    whole = round(seconds)
    days, rest = divmod(whole, 86400)
    hours, rest = divmod(rest, 3600)
    minutes, rest = divmod(rest, 60)
    parts = [(days, "d"), (hours, "h"), (minutes, "min"), (rest, "s")]
    if days:
        parts = parts[:3]
    shown = [f"{value} {unit}" for value, unit in parts if value]
    return " ".join(shown) or f"{seconds:.3g} s"


def energy_text(joules: float, per: str) -> str:
    """Return an energy (J) in a readable unit.

    >>> energy_text(3103352.0, "")
    '3.103 MJ (0.862 kWh)'
    """
    for size, unit in ((1e9, "GJ"), (1e6, "MJ"), (1e3, "kJ"), (0.0, "J")):
        if abs(joules) >= size:
            shown = f"{joules / max(size, 1.0):.4g} {unit}{per}"
            return f"{shown} ({joules / 3.6e6:.3g} kWh{per})" if abs(joules) >= 3.6e4 else shown
    return f"0 J{per}"


def event_lines(answers: Answers, shown: Shown = METRIC) -> list[str]:
    """Return one line for every event, the ones that happened first."""
    events = (answers.get("history") or {}).get("events")
    lines: list[str] = []
    if not isinstance(events, Mapping):
        return lines
    for name, event in sorted(events.items(), key=lambda item: (not item[1]["happened"], item[1]["time"] or 0.0)):
        if event["happened"]:
            error = f" ± {duration_text(max(event['error'], 1.0))}" if event.get("error") else ""
            lines.append(f"{name}: after {duration_text(event['time'])}{error} ({shown.watched(event)})")
        else:
            lines.append(
                f"{name}: not reached; closest {shown.temperature(event['closest'])} after {duration_text(event['closest_at'])} "
                f"({shown.watched(event)})"
            )
    return lines


def front_text(front: Mapping[str, Any] | None) -> str:
    """Return where a front is, along every axis in mm; nothing where there is none.

    >>> front_text({"from": (20.2, 0.0), "to": (23.64, 5.0)})
    '; its front is at x 20.2 to 23.6, y 0 to 5 mm'
    """
    if front is None:
        return ""
    ends = zip("xyz", front["from"], front["to"], strict=False)
    return (
        "; its front is at "
        + ", ".join(f"{a} {round(low, 1):g} to {round(high, 1):g}" for a, low, high in ends)
        + " mm"
    )


def run_lines(answers: Answers) -> list[str]:
    """Return what the machines did, what heat went where, and how slow the model is."""
    history = answers["history"]
    per = "/m" if answers.get("units", {}).get("heat_flow") == "W/m" else ""
    lines = ["Over the run"]
    lines.append(f"  simulated   {duration_text(history['duration'])}")
    for name, machine in history["machines"].items():
        used = f", used {energy_text(machine['energy'], per)}" if machine["energy"] else ""
        lines.append(
            f"  machine of {name}   took {energy_text(machine['heat'], per)}{used}; "
            f"ran {100 * machine['running_share']:.0f} % of the time, {100 * machine['running_share_at_end']:.0f} % "
            f"towards the end; peak {machine['peak']:.4g} W{per}"
        )
    for name, energy in history["energies"]["boundaries"].items():
        if energy:
            lines.append(f"  heat through {name}   {energy_text(energy, per)} into the solid")
    for name, melted in history.get("melted", {}).items():
        lines.append(
            f"  melted part of {name}   {100 * melted['at_start']:.0f} % at the start, "
            f"{100 * melted['at_end']:.0f} % at the end{front_text(melted['front'])}"
        )
    heat = history["energies"]
    lines.append(
        f"  balance   {energy_text(heat['in'], per)} came in, {energy_text(heat['stored'], per)} are stored: "
        f"they differ by {heat['relative_closure']:.1e} of what passed through"
    )
    if history.get("time_constants"):
        unit, seconds = scale_of(history["time_constants"][0])
        listed = ", ".join(f"{tau / seconds:.3g}" for tau in history["time_constants"])
        lines.append(f"  slowest time constants   {listed} {unit} (machines standing still)")
    return lines
