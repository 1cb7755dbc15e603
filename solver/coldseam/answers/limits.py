"""Limits: met or not, with the margin.

A limit on a heat flow is held against the *size* of the flow: a space that gains heat has a negative flow into the
solid, and "at most 250 W" must not be met by 300 W the wrong way. A negative bound asks for the signed flow.
A limit that lies inside the quantity's interval is *undecided*: it counts as not met, since it is not shown.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

from coldseam.answers.surfaces import space_humidity_needed
from coldseam.errors import CaseError, Fault

if TYPE_CHECKING:
    from coldseam.answers.types import Answers
    from coldseam.case.model import Case, Limit

FLOW_UNITS = {
    "heat_flow": "W",
    "psi": "W/(m·K)",
    "chi": "W/K",
    "temperature": "°C",
    "f_Rsi": "",
    "surface_humidity": "",
    "K": "W/(m²·K)",
}
Value = tuple[float, float | None, float | None]


def require_answerable(case: Case) -> None:
    """Refuse limits that no answer of the case can meet or miss.

    Raises
    ------
    CaseError
        A limit on humidity where none is given, on a temperature factor or the flow of what faces no space.
    """
    faults = []
    for number, limit in enumerate(case.limit):
        asked = limit.quantity
        lacking = ""
        if asked.surface_humidity:
            lacking = space_humidity_needed(case, asked.boundary)
        elif asked.f_Rsi and next(b.space for b in case.boundary if b.name == asked.boundary) is None:
            lacking = f'"{asked.boundary}" faces no space'
        elif asked.K and next(body.enclosure for body in case.body if body.name == asked.body) is None:
            lacking = f'"{asked.body}" is no enclosure; K is that of a box'
        elif asked.psi or asked.chi:
            kind = next(bridge.kind for bridge in case.bridge if bridge.name == asked.bridge)
            key = "psi" if asked.psi else "chi"
            lacking = (
                "" if (kind == "linear") == (key == "psi") else f'"{asked.bridge}" is a {kind} bridge and has no {key}'
            )
        if lacking:
            faults.append(Fault(path=("limit", number, "quantity"), what=f"can't be answered: {lacking}"))
    if faults:
        raise CaseError(faults)


def limits(case: Case, answers: Answers) -> dict[str, dict[str, Any]]:
    """Return verdict and margin of every limit, by its name.

    Raises
    ------
    CaseError
        The quantity has no value in these answers.
    """
    return {limit.name: _verdict(case, number, limit, answers) for number, limit in enumerate(case.limit)}


def _verdict(case: Case, number: int, limit: Limit, answers: Answers) -> dict[str, Any]:
    value, low, high = _value(number, limit, answers)
    measure = limit.quantity.measure
    signed = any(bound is not None and bound < 0.0 for bound in (limit.at_most, limit.at_least))
    if measure == "heat_flow" and not signed:
        value, low, high = magnitude(value, low, high)
    section = case.model.dimensions == 2 and not case.model.axisymmetric
    unit = "W/m" if measure == "heat_flow" and section else FLOW_UNITS[measure]
    return {
        "quantity": {
            limit.quantity.target: getattr(limit.quantity, limit.quantity.target),
            measure: getattr(limit.quantity, measure),
        },
        "value": value,
        "low": low,
        "high": high,
        "unit": unit,
        "at_most": limit.at_most,
        "at_least": limit.at_least,
        "size_of_flow": measure == "heat_flow" and not signed,
    } | judge(value, low, high, limit.at_most, limit.at_least)


def magnitude(value: float, low: float | None, high: float | None) -> Value:
    """Return the size of a quantity and the interval of its size, in the quantity's unit.

    Examples
    --------
    >>> magnitude(-3.0, -3.5, -2.5), magnitude(0.1, -0.2, 0.4)
    ((3.0, 2.5, 3.5), (0.1, 0.0, 0.4))
    """
    if low is None or high is None:
        return abs(value), None, None
    least = 0.0 if low <= 0.0 <= high else min(abs(low), abs(high))
    return abs(value), least, max(abs(low), abs(high))


def judge(
    value: float, low: float | None, high: float | None, at_most: float | None, at_least: float | None
) -> dict[str, Any]:
    """Return whether bounds are met, with the margin, all in one unit.

    The margin is the distance of the value to the nearest bound, negative when it is past it.

    Examples
    --------
    >>> judge(240.0, 238.0, 243.0, 250.0, None)["met"], judge(249.0, 247.0, 251.0, 250.0, None)
    (True, {'met': False, 'undecided': True, 'margin': 1.0})
    """
    first, last = (value if low is None else low), (value if high is None else high)
    margins, surely, possibly = [math.inf], True, True
    if at_most is not None:
        margins.append(at_most - value)
        surely, possibly = surely and last <= at_most, possibly and first <= at_most
    if at_least is not None:
        margins.append(value - at_least)
        surely, possibly = surely and first >= at_least, possibly and last >= at_least
    return {"met": surely, "undecided": possibly and not surely, "margin": min(margins)}


def _value(number: int, limit: Limit, answers: Answers) -> Value:
    asked, measure = limit.quantity, limit.quantity.measure
    name = getattr(asked, asked.target)
    if measure == "heat_flow":
        entry = (answers.spaces if asked.target == "space" else answers.boundaries)[name]
        return entry.heat_flow, entry.heat_flow_low, entry.heat_flow_high
    if measure == "temperature":
        if asked.target == "probe":
            return answers.probes[name].temperature, None, None
        return getattr(answers.boundaries[name].temperature, asked.temperature), None, None
    if measure == "K":
        return _of_enclosure(answers.enclosures.get(name, {}), number)
    if measure in ("psi", "chi"):
        return _of_bridge(answers.bridges.get(name, {}), measure, number)
    surface = answers.surfaces[name]
    if measure == "f_Rsi":
        if surface["f_Rsi"].value is None:
            raise _unanswered(number, surface["f_Rsi"].remark)
        return surface["f_Rsi"].value, None, None
    if surface["moisture"] is None:
        raise _unanswered(number, f'the space of "{name}" has no relative_humidity')
    return surface["moisture"].surface_humidity, None, None


def _of_bridge(entry: Mapping[str, Any], measure: str, number: int) -> Value:
    if measure not in entry:
        raise _unanswered(number, f"the bridge has no {measure}")
    return entry[measure], entry.get(f"{measure}_low"), entry.get(f"{measure}_high")


def _of_enclosure(entry: Mapping[str, Any], number: int) -> Value:
    if "K" not in entry:
        raise _unanswered(number, "; ".join(entry.get("remarks", ())) or entry.get("remark", "there is no K"))
    return entry["K"], entry["K_low"], entry["K_high"]


def _unanswered(number: int, why: str) -> CaseError:
    return CaseError([Fault(path=("limit", number, "quantity"), what=f"can't be answered: {why}")])


TOUCH = (
    "how long skin stands a hot or a cold surface depends on its material, the time and the person; ISO 13732-1 (hot) and "
    "ISO 13732-3 (cold) give thresholds, local codes and licensed practice decide, and this computed temperature is of a "
    "clean surface at the conditions stated"
)


def limit_warnings(case: Case, found: Mapping[str, Mapping[str, Any]]) -> list[str]:
    """Return a sentence for each limit that is undecided, and the caution where people touch."""
    touched = [limit.name for limit in case.limit if limit.touch]
    told = [f"caution, touch limits ({', '.join(touched)}): {TOUCH}"] if touched else []
    return told + [
        f'limit "{name}" is undecided: it lies inside the interval {entry["low"]:.6g} to {entry["high"]:.6g} '
        f"{entry['unit']}; it counts as not met - ask for a better accuracy"
        for name, entry in found.items()
        if entry["undecided"]
    ]
