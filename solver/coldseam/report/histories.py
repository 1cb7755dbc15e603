"""The chapter of a report on histories and events; it appears when the answers carry them."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

from coldseam.report.markup import Markup, joined, name, table, tag
from coldseam.report.shown import Shown

MOST_EVENTS = 60


def histories(answers: Mapping[str, Any], folder: Path, shown: Shown) -> Markup:
    """Return the events of a transient as a table, and what else its history tells; empty for a steady case.

    Parameters
    ----------
    answers
        ``history`` is read if it is there: ``events`` (a list of tables), ``file`` (CSV), and plain facts beside.
    folder
        Where the CSV lies.
    shown
        Units.
    """
    history = answers.get("history")
    if not isinstance(history, Mapping) or not history:
        return Markup("")
    events = [event for event in history.get("events") or () if isinstance(event, Mapping)]
    keys = list(dict.fromkeys(key for event in events for key in event))
    rows = [tuple(_cell(key, event.get(key), shown) for key in keys) for event in events[:MOST_EVENTS]]
    facts = [(key.replace("_", " "), _cell(key, value, shown)) for key, value in history.items()
             if key not in ("events", "file") and not isinstance(value, Mapping | list | tuple)]  # fmt: skip
    left = f"The first {MOST_EVENTS} of {len(events)} events are shown." if len(events) > MOST_EVENTS else ""
    file = history.get("file")
    where = [tag("p", ["Every value over time is in ", tag("code", file), " beside this report."])] if file else []
    return joined([
        table("Histories", ("what", "value"), facts),
        table("Events", [key.replace("_", " ") for key in keys], rows) if rows else tag("p", "No event happened."),
        tag("p", left) if left else "",
        *where,
    ])  # fmt: skip


def _cell(key: str, value: Any, shown: Shown) -> Markup | str:
    if value is None:
        return ""
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, int | float):
        if "temperature" in key:
            return shown.temperature(float(value))
        if key in ("time", "at", "start", "end", "duration", "first", "last"):
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
