"""The chapter of a report on histories and events; it appears when the answers carry them."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

from coldseam.case.units import BTU
from coldseam.report.markup import Markup, joined, name, table, tag
from coldseam.report.shown import Shown

MOST_EVENTS = 60


def histories(answers: Mapping[str, Any], folder: Path, shown: Shown) -> Markup:
    """Return the events of a transient as a table, and what else its history tells; empty for a steady case.

    Parameters
    ----------
    answers
        ``history`` is read if it is there: ``events`` and ``machines`` (tables by name), ``file`` (CSV), plain facts beside.
    folder
        Where the CSV lies.
    shown
        Units.
    """
    history = answers.get("history")
    if not isinstance(history, Mapping) or not history:
        return Markup("")
    events = [{**e, "watched": shown.watched(e)} if "watched" in e else e for e in _entries(history.get("events"))]
    events.sort(key=lambda event: (not event.get("happened", True), event.get("time") or 0.0))
    facts = [(key.replace("_", " "), _cell(key, value, shown)) for key, value in history.items()
             if key not in ("events", "file", "asked_duration") and not isinstance(value, Mapping | list | tuple)]  # fmt: skip
    constants = [duration(float(tau)) for tau in history.get("time_constants") or ()]
    facts += [("slowest time constants", ", ".join(constants))] if constants else []
    left = f"The first {MOST_EVENTS} of {len(events)} events are shown." if len(events) > MOST_EVENTS else ""
    file = history.get("file")
    where = [tag("p", ["Every value over time is in ", tag("code", file), " beside this report."])] if file else []
    return joined([
        table("Histories", ("what", "value"), facts),
        _by_name("Events", events[:MOST_EVENTS], shown) if events else tag("p", "The case asks for no event."),
        _by_name("Machines", _entries(history.get("machines")), shown),
        _melting(history.get("melted"), shown),
        tag("p", left) if left else "",
        *where,
    ])  # fmt: skip


def _melting(given: Any, shown: Shown) -> Markup | str:
    """Return the table of melting bodies: parts melted, and where the front (half of it melted) is at the end."""
    if not isinstance(given, Mapping) or not given:
        return ""
    rows = []
    for body, entry in given.items():
        front = entry.get("front")
        where = "none" if front is None else " to ".join(shown.place(front[end]) for end in ("from", "to"))
        rows.append((name(body), *(f"{100 * entry[key]:.0f} %" for key in ("at_start", "at_end")), where))
    return table("Melting", ("body", "melted at the start", "melted at the end", "front at the end"), rows)


def _entries(given: Any) -> list[Mapping[str, Any]]:
    """Return tables by name, or a list of them, as a list whose entries carry their name."""
    if isinstance(given, Mapping):
        return [{"name": key, **entry} for key, entry in given.items() if isinstance(entry, Mapping)]
    return [entry for entry in given or () if isinstance(entry, Mapping)]


def _by_name(caption: str, entries: list[Mapping[str, Any]], shown: Shown) -> Markup:
    keys = list(dict.fromkeys(key for entry in entries for key in entry if not isinstance(entry[key], Mapping | list)))
    rows = [tuple(_cell(key, entry.get(key), shown) for key in keys) for entry in entries]
    return table(caption, [key.replace("_", " ") for key in keys], rows)


def _cell(key: str, value: Any, shown: Shown) -> Markup | str:
    if value is None:
        return ""
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, int | float):
        if "share" in key:
            return f"{100 * value:.3g} %"
        if key in ("energy", "heat"):
            return f"{value / 3.6e6:.4g} kWh" if shown.system == "metric" else f"{value / BTU:.4g} Btu"
        if key == "peak":
            return shown.amount("flow", float(value))
        if "temperature" in key or key in ("closest", "level"):
            return shown.temperature(float(value))
        if key.endswith("duration") or key in (
            "time",
            "at",
            "start",
            "end",
            "duration",
            "first",
            "last",
            "error",
            "closest_at",
        ):
            return duration(float(value))
        return f"{value:.5g}"
    return name(value)


def duration(seconds: float) -> str:
    """Return a time (s) in the units one would say it in.

    >>> duration(90), duration(7260), duration(200000)
    ('1 min 30 s', '2 h 1 min', '2 d 7 h 33 min')
    """
    if seconds < 60:
        return f"{seconds:.3g} s"
    whole = round(seconds) if seconds < 3600 else 60 * round(seconds / 60)
    parts = []
    for size, unit in ((86400, "d"), (3600, "h"), (60, "min"), (1, "s")):
        count, whole = divmod(whole, size)
        if count:
            parts.append(f"{count} {unit}")
    return " ".join(parts)
