"""The summary a run ends with: plain text, the answer first, built from the answers and nothing else.

Numbers carry their unit and as many digits as their error allows: ``12.43 ± 0.10 W``. The interval that is
printed always contains the interval of the answers, rounding included.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from coldseam.mesh.measure import cell_measure
from coldseam.report.digits import number, with_error
from coldseam.report.laws import film_rows
from coldseam.report.timed import event_lines, run_lines
from coldseam.report.view import View, boundary_areas

SMALL_SHARE = 0.001
"""Share of a heat flow below which a term is left to the tables."""
MOST_REACTIONS = 5
_TERMS = {"parts": "part", "by_body": "body", "by_film": "film", "by_sheet": "sheet", "by_contact": "contact"}

Answers = Mapping[str, Any]


def temperature(value: float) -> str:
    """Return a temperature (°C) to the tenth of a degree.

    >>> temperature(-0.04), temperature(16.84)
    ('0.0 °C', '16.8 °C')
    """
    return f"{round(value, 1) + 0.0:.1f} °C"


def place(at: Sequence[float]) -> str:
    """Return a position (mm).

    >>> place([150, 150.04, 0])
    '(150, 150, 0) mm'
    """
    return "(" + ", ".join(f"{round(x, 1) + 0.0:g}" for x in at) + ") mm"


def flow_unit(answers: Answers) -> str:
    """Return the unit of heat flows: W/m in a plane cross-section, W otherwise."""
    unit = answers.get("units", {}).get("heat_flow")
    if unit:
        return str(unit)
    return "W/m" if answers.get("dimensions") == 2 and not answers.get("axisymmetric") else "W"


def summary(answers: Answers, files: Sequence[str] = ()) -> str:
    """Return what a finished run prints.

    Parameters
    ----------
    answers
        The content of answers.json.
    files
        Paths of what was written, as the user should read them.
    """
    over_time = bool(answers.get("history"))
    sections = [
        [*event_lines(answers), str(answers.get("title") or "Untitled case")],
        run_lines(answers) if over_time else [],
        _flows(answers),
        _coupling(answers),
        _trust(answers),
        _surfaces(answers),
        _moisture(answers),
        _films(answers),
        _probes(answers),
        _bridges(answers),
        _losses(answers),
        _limits(answers),
        _listed("Warnings", answers.get("warnings", ())),
        _listed("Files", files),
    ]
    return "\n\n".join("\n".join(lines) for lines in sections if lines) + "\n"


def _table(rows: Sequence[Sequence[str]], right: Sequence[int] = ()) -> list[str]:
    """Return rows as lines with aligned columns, those in ``right`` to the right."""
    if not rows:
        return []
    widths = [max(len(row[i]) for row in rows) for i in range(len(rows[0]))]
    return ["  " + "   ".join(_aligned(row, widths, right)).rstrip() for row in rows]


def _aligned(row: Sequence[str], widths: Sequence[int], right: Sequence[int]) -> list[str]:
    return [row[i].rjust(width) if i in right else row[i].ljust(width) for i, width in enumerate(widths)]


def _flows(answers: Answers) -> list[str]:
    unit = flow_unit(answers)
    area = "m²/m" if unit == "W/m" else "m²"
    spaces = [
        (f"from space {name}", _flow(entry, unit), f"at {temperature(entry['temperature'])}")
        for name, entry in answers.get("spaces", {}).items()
    ]
    boundaries = [
        (f"through {name}", _flow(entry, unit), f"over {number(entry['area'])} {area}")
        for name, entry in answers.get("boundaries", {}).items()
        if entry.get("kind") != "adiabatic"
    ]
    when = " at the end of the run" if answers.get("history") else ""
    return [f"Heat flow{when} (positive: into the solid)", *_table(spaces + boundaries, right=(1,))]


def _flow(entry: Answers, unit: str) -> str:
    return with_error(entry["heat_flow"], entry.get("heat_flow_low"), entry.get("heat_flow_high"), unit)


def _coupling(answers: Answers) -> list[str]:
    unit = "W/(m·K)" if flow_unit(answers) == "W/m" else "W/K"
    intervals = answers.get("coupling_intervals", {})
    rows: dict[frozenset[str], tuple[str, str]] = {}
    for one, others in answers.get("coupling", {}).items():
        for other, value in others.items():
            if one != other and frozenset((one, other)) not in rows:
                low, high = intervals.get(one, {}).get(other, (None, None))
                rows[frozenset((one, other))] = (f"{one} - {other}", with_error(value, low, high, unit))
    linearised = (answers.get("solver") or {}).get("linearised")
    title = "Thermal coupling" + (" (linearised: films and conductivities held at this answer)" if linearised else "")
    return [title, *_table(list(rows.values()))] if rows else []


def _trust(answers: Answers) -> list[str]:
    """How far the flows can be trusted: accuracy reached, balance, mesh."""
    lines = []
    accuracy = answers.get("accuracy")
    if accuracy:
        lines.append(accuracy_sentence(accuracy, [*answers["spaces"].values(), *answers["boundaries"].values()]))
    balance = answers.get("balance")
    if balance and not answers.get("history"):
        closure = f"{balance['closure']:.1e} {flow_unit(answers)}"
        lines.append(f"Balance: the heat flows add up to {closure}, {balance['relative']:.1e} of what flows through")
    mesh = answers.get("mesh")
    if mesh:
        lines.append(f"Mesh: {mesh['nodes']} nodes, {mesh['cells']} cells, after {mesh['rounds']} rounds")
    return lines


def accuracy_sentence(accuracy: Answers, entries: Sequence[Answers]) -> str:
    """Return the accuracy reached and asked, and what kind of statement it is."""
    if "over_time" in accuracy:
        return _accuracy_over_time(accuracy)
    asked = f"{100 * accuracy['asked']:.3g} % asked"
    if accuracy["reached"] is None:
        return f"Accuracy: the error of the heat flows is not known ({asked})"
    reached = f"Accuracy: every heat flow to {100 * accuracy['reached']:.2g} %, {asked}"
    if all(entry["interval"] == "guaranteed" for entry in entries):
        return f"{reached} (a guaranteed interval)"
    reasons = dict.fromkeys(entry["interval_reason"] for entry in entries if entry.get("interval_reason"))
    return f"{reached} (an estimate{': ' if reasons else ''}{'; '.join(reasons)})"


def _accuracy_over_time(accuracy: Answers) -> str:
    found, reached = accuracy["over_time"], accuracy["reached"]
    steady = "" if reached is None else f"; steady heat flows on the mesh before it to {100 * reached:.2g} %"
    return (
        f"Accuracy (an estimate, not a proof): temperatures to some {found['temperature']:.2g} K, of which the time steps "
        f"{found['temperature_from_steps']:.2g} K; times and heat to some {100 * found['share']:.2g} %{steady}"
    )


def _surfaces(answers: Answers) -> list[str]:
    """The coldest place of every surface that heat passes, the coldest surface first."""
    found = [
        (entry["temperature"], name)
        for name, entry in answers.get("boundaries", {}).items()
        if entry.get("kind") != "adiabatic"
    ]
    found.sort(key=lambda pair: pair[0]["min"])
    rows = [
        (
            name,
            temperature(extremes["min"]),
            f"at {place(extremes['min_at'])}",
            f"warmest {temperature(extremes['max'])}",
        )
        for extremes, name in found
    ]
    return ["Coldest place of each surface", *_table(rows, right=(1,))] if rows else []


def _moisture(answers: Answers) -> list[str]:
    """What each surface does with the humidity of its space, at its coldest place."""
    rows = []
    for name, entry in answers.get("surfaces", {}).items():
        found, factor = entry.get("moisture"), (entry.get("f_Rsi") or {}).get("value")
        if found:
            rows.append((name, "" if factor is None else f"f_Rsi {factor:.3f}", _verdict(found)))
    return ["Moisture at the coldest place of each surface", *_table(rows)] if rows else []


def _films(answers: Answers) -> list[str]:
    """What films and air gaps that depend on the answer came to."""
    rows = film_rows(answers)
    return ["Films and air gaps as the answer made them", *_table(rows)] if rows else []


def _verdict(found: Answers) -> str:
    """Return in words what the air does at a surface, and how far that is from happening."""
    margin = found["margin_condensation_kelvin"]
    over = found["saturation_over"]
    point = f"{'frost' if over == 'ice' else 'dew'} point {temperature(found['saturation'])}"
    if margin < 0:
        does = "frosts" if over == "ice" else "sweats"
        return f"{does}: {-margin:.1f} K below the {point}, on {100 * found['share_condensation']:.2g} % of the area"
    dry = f"{100 * found['surface_humidity']:.0f} % humidity, {margin:.1f} K above the {point}"
    if found["margin_mould"] < 0:
        return f"{dry}; mould can grow on {100 * found['share_mould']:.2g} % of the area"
    return dry


def _losses(answers: Answers) -> list[str]:
    """Where the heat of the space that gives most goes, and what 1 % more of each input does to it."""
    flows = {name: entry["heat_flow"] for name, entry in answers.get("losses", {}).items()}
    if not flows or not max(flows.values(), key=abs):
        return []
    space = max(flows, key=lambda name: flows[name])
    entry, unit = answers["losses"][space], flow_unit(answers)
    kinds = ("parts", "by_body", "by_film", "by_sheet", "by_contact")
    terms = [(kind, name, part) for kind in kinds for name, part in (entry.get(kind) or {}).items()]
    rows = [
        (_TERMS[kind], name, f"{number(part['heat_flow'], 3)} {unit}", f"{100 * part['share']:.1f} %")
        for kind, name, part in sorted(terms, key=lambda term: (kinds.index(term[0]) > 0, -abs(term[2]["heat_flow"])))
        if part["share"] is not None and abs(part["share"]) >= SMALL_SHARE
    ]
    reacts = answers.get("sensitivities", {}).get(space, {}).get("ranked", ())
    words = [
        f"{r['input']} {100 * r['relative'] * r['change']:+.2g} %"
        + (f" (± {100 * r['change']:.2g} %)" if r["change_stated"] else "")
        for r in reacts[:MOST_REACTIONS]
        if r["relative"] is not None
    ]
    told = [f"What 1 % more does to it (stated uncertainties in full): {', '.join(words)}"] if words else []
    return [f"Where the heat from space {space} goes", *_table(rows, right=(2, 3)), *told] if rows else []


def _probes(answers: Answers) -> list[str]:
    rows = [
        (name, temperature(entry["temperature"]), f"at {place(entry['at'])}")
        for name, entry in answers.get("probes", {}).items()
    ]
    return ["Probes", *_table(rows, right=(1,))] if rows else []


def _bridges(answers: Answers) -> list[str]:
    rows = []
    for name, entry in answers.get("bridges", {}).items():
        for key, unit in (("psi", "W/(m·K)"), ("chi", "W/K")):
            if isinstance(entry.get(key), int | float):
                rows.append(
                    (name, key, with_error(entry[key], entry.get(f"{key}_low"), entry.get(f"{key}_high"), unit))
                )
    return ["Thermal bridges", *_table(rows)] if rows else []


def _limits(answers: Answers) -> list[str]:
    rows = []
    for name, entry in answers.get("limits", {}).items():
        unit = f" {entry['unit']}" if entry.get("unit") else ""
        bounds = [
            f"{words} {number(entry[key])}{unit}"
            for key, words in (("at_most", "at most"), ("at_least", "at least"))
            if entry.get(key) is not None
        ]
        verdict = "met" if entry["met"] else "NOT MET"
        rows.append((verdict, name, f"{number(entry['value'])}{unit}", ", ".join(bounds)))
    return ["Limits", *_table(rows)] if rows else []


def _listed(heading: str, lines: Sequence[str]) -> list[str]:
    return [heading, *(f"  {line}" for line in lines)] if lines else []


def model_summary(view: View, files: Sequence[str] = (), warnings: Sequence[str] = ()) -> str:
    """Return what a check prints: the bodies and boundaries of a model with their sizes.

    Parameters
    ----------
    view
        The model; it needs no solution.
    files
        Paths of what was written, as the user should read them.
    warnings
        What is odd and no fault, one sentence each.
    """
    mesh = view.mesh
    section = mesh.dim == 2 and not mesh.axisymmetric
    sizes = np.bincount(mesh.cell_body, cell_measure(mesh), len(mesh.bodies))
    bodies = [
        (body.name, f"{number(size)} {'m³/m' if section else 'm³'}", body.material)
        for body, size in zip(mesh.bodies, sizes.tolist(), strict=True)
    ]
    boundaries = [
        (name, f"{number(area)} {'m²/m' if section else 'm²'}", f"space {space}" if space else kind.replace("_", " "))
        for name, space, kind, area in zip(
            view.boundary_names, view.boundary_space, view.boundary_kind, boundary_areas(view).tolist(), strict=True
        )
    ]
    sections = [
        [view.title or "Untitled case"],
        ["Bodies", *_table(bodies, right=(1,))],
        ["Boundaries", *_table(boundaries, right=(1,))],
        [f"Mesh: {mesh.n_nodes} nodes, {mesh.n_cells} cells. Nothing was solved."],
        _listed("Warnings", warnings),
        _listed("Files", files),
    ]
    return "\n\n".join("\n".join(lines) for lines in sections if lines) + "\n"
